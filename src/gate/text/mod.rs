//! Delimited text: found out, split, and walked through in blocks.

mod blocks;
mod encoding;
mod head;
mod marks;
mod scan;
mod source;
mod split;

pub(in crate::gate) use encoding::Encoding;
pub(in crate::gate) use head::Head;
pub(in crate::gate) use scan::{Parts, Work, scan};
pub(in crate::gate) use source::{Form, Open, TextSource};
pub(in crate::gate) use split::{Dialect, Rows};
