//! What a plan may say about candidates.

use crate::units::{Length, Share};

/// A parameter that is given or to be fitted.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Fit<T> {
    /// Found by the program.
    Fitted,
    /// As the plan says.
    Given(T),
}

/// Kernel density of the units.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct DensityPlan {
    /// Standard deviation of the Gaussian kernel per axis.
    pub bandwidth: Fit<Length>,
}

/// The form of a curve; falling over distance, rising over values.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum CurveForm {
    /// exp(−d/scale), falling.
    Exponential,
    /// exp(−d²/2·scale²), falling.
    HalfNormal,
    /// (1+d/scale)^(−shape), falling.
    FallingPower,
    /// (x+offset)^exponent, rising.
    RisingPower,
    /// exp(rate·x), rising.
    LogLinear,
}

impl CurveForm {
    /// The plan's word for it.
    pub fn word(self) -> &'static str {
        match self {
            Self::Exponential => "exponential",
            Self::HalfNormal => "half-normal",
            Self::FallingPower | Self::RisingPower => "power",
            Self::LogLinear => "log-linear",
        }
    }

    /// Names of its parameters, as results show them after the layer's name.
    pub fn parameters(self) -> &'static [&'static str] {
        match self {
            Self::Exponential | Self::HalfNormal => &["scale"],
            Self::FallingPower => &["scale", "shape"],
            Self::RisingPower => &["exponent", "offset"],
            Self::LogLinear => &["rate"],
        }
    }
}

/// One layer's part in a candidate.
#[derive(Debug, Clone, PartialEq)]
pub struct TermPlan {
    /// Name of the layer.
    pub layer: String,
    /// Form of the curve.
    pub form: CurveForm,
    /// One entry per name in `form.parameters()`, in that order; metres where it is a length. A
    /// `RisingPower` offset that is `Fitted` is the smallest positive value of the layer.
    pub parameters: Vec<Fit<f64>>,
}

/// What a candidate is made of.
#[derive(Debug, Clone, PartialEq)]
pub enum CandidateKind {
    /// Smoothed units.
    Density(DensityPlan),
    /// Fitted curves over layers.
    Uses {
        /// One term per layer, in the order of the plan.
        terms: Vec<TermPlan>,
        /// Share of effort spread evenly.
        base: Fit<Share>,
        /// Kernel of the smooth field over what the layers leave unexplained.
        remainder: Option<Fit<Length>>,
    },
    /// A mixture of other candidates' surfaces, by name.
    Blend(Vec<String>),
    /// No effort pattern at all.
    Uniform,
}

/// One `[[candidate]]` of a plan.
#[derive(Debug, Clone, PartialEq)]
pub struct CandidatePlan {
    /// Its name.
    pub name: String,
    /// What it is made of.
    pub kind: CandidateKind,
}
