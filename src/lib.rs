//! `trodden` builds effort rasters for niche models: where people looked, on the grid of the
//! covariates, from target-group records, population and access layers, checked on records held
//! out.
//!
//! The rooms, from the ground up; each imports only rooms declared before it (a test guards this):
//! [`units`], [`diag`], [`maths`], [`grid`], [`records`], [`proxies`], [`model`], [`check`],
//! [`output`], [`gate`], [`plan`], [`study`].

pub mod units;
pub mod diag;
pub mod maths;
pub mod grid;
pub mod records;
pub mod proxies;
pub mod model;
pub mod check;
pub mod output;
pub mod gate;
pub mod plan;
pub mod study;
