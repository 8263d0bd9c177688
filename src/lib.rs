//! `trodden` builds effort rasters for niche models: where people looked, on the grid of the
//! covariates, from target-group records, population and access layers, checked on records held
//! out.
//!
//! The rooms, from the ground up; each imports only rooms declared before it (a test guards this):
//! [`units`], [`diag`], [`maths`], [`grid`], [`records`], [`proxies`], [`model`], [`check`],
//! [`output`], [`gate`], [`plan`], [`study`].
//!
//! A plan is text; reading it says every problem at once:
//!
//! ```
//! let plan = r#"
//! title = "Hoverflies"
//! [grid]
//! like = "temperature.tif"
//! [records]
//! file = "records.tsv"
//! [[candidate]]
//! name = "recorded"
//! density = { bandwidth = 500 }
//! [surface]
//! flor = 0.01
//! "#;
//! let problems = trodden::plan::read(plan, "plan.toml").unwrap_err();
//! let rules: Vec<&str> = problems.0.iter().map(|p| p.rule).collect();
//! assert_eq!(rules, ["missing_unit", "unknown_key"]);
//! assert!(problems.0[1].cure.contains("`floor`"));
//! ```

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
