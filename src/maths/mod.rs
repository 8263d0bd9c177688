//! Numerics without geography: floats, sums, random streams, kernels, optimisers, ranks.
//!
//! Knows no coordinates and no records. Everything here gives the same bits whatever the number
//! of threads: sums run over chunks of fixed size, combined in order.

pub mod decimal;
pub mod float;
pub mod gaussian;
pub mod linear;
pub mod optimise;
pub mod quantile;
pub mod random;
pub mod rank;
pub mod sum;
