//! A text that can be opened as often as needed, whatever it is packed in.

use std::io::Read;

use crate::diag::Outcome;
use crate::records::Quotes;

use super::encoding::Encoding;
use super::split::Dialect;

/// Opens a stream anew.
pub(in crate::gate) type Open<'a> = Box<dyn Fn() -> Outcome<Box<dyn Read + Send>> + Sync + 'a>;

/// How a text is laid out.
#[derive(Debug, Clone, Copy)]
pub(in crate::gate) enum Form {
    /// As its own first line shows; quotes as the plan says, if it does.
    Found(Option<Quotes>),
    /// As a description beside it says.
    Given {
        /// Its signs.
        dialect: Dialect,
        /// Its encoding.
        encoding: Encoding,
        /// Rows of header.
        header: u64,
        /// Columns that are named; a row has at least as many fields.
        columns: usize,
    },
}

/// A text.
pub(in crate::gate) struct TextSource<'a> {
    /// What messages call it.
    pub(in crate::gate) name: &'a str,
    /// Opens it.
    pub(in crate::gate) open: Open<'a>,
    /// Its layout.
    pub(in crate::gate) form: Form,
}
