//! Transcendental functions that give the same bits on every machine.
//!
//! The standard library hands these to whatever C library the machine has; a clippy rule sends
//! every caller here instead.

pub use libm::{asin, atan2, cos, erf, exp, expm1, log as ln, log1p, log10, pow, sin};

/// Square root (exact by IEEE 754 on every machine).
pub fn sqrt(x: f64) -> f64 {
    x.sqrt()
}

/// `x` raised to two.
pub fn square(x: f64) -> f64 {
    x * x
}
