//! What the program has to say about its inputs: errors, warnings and progress, as values.
//!
//! Prints nothing; the binary renders what is collected here.

use std::fmt;

/// Whose fault an error is; decides the exit code.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub enum Fault {
    /// The program itself is at fault (exit code 1).
    Defect,
    /// Wrong usage or a wrong plan (2).
    Plan,
    /// An input cannot be used (3).
    Input,
    /// An output cannot be written (4).
    Output,
}

impl Fault {
    /// The exit code that goes with the fault.
    pub fn exit_code(self) -> u8 {
        match self {
            Self::Defect => 1,
            Self::Plan => 2,
            Self::Input => 3,
            Self::Output => 4,
        }
    }
}

/// A stretch of a text file to quote: the line as it stands and where in it the fault lies.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Quote {
    /// Line, counted from 1.
    pub line: usize,
    /// Column of the first character, counted from 1.
    pub column: usize,
    /// How many characters are at fault (at least 1).
    pub width: usize,
    /// The whole line.
    pub text: String,
}

/// One thing that is wrong or deserves attention.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Diagnostic {
    /// Stable name of the rule, such as `unknown_key`.
    pub rule: &'static str,
    /// Whose fault it is (a warning keeps the fault it would have as an error).
    pub fault: Fault,
    /// File and place in it (`plan.toml:4:7`, `roads.gpkg, layer roads`); empty for none.
    pub place: String,
    /// What was found and what was expected.
    pub text: String,
    /// What to do about it.
    pub cure: String,
    /// The offending line of a plan.
    pub quote: Option<Quote>,
}

impl Diagnostic {
    fn new(rule: &'static str, fault: Fault, place: impl Into<String>, text: impl Into<String>) -> Self {
        Self { rule, fault, place: place.into(), text: text.into(), cure: String::new(), quote: None }
    }

    /// A fault of the plan or the command line.
    pub fn plan(rule: &'static str, place: impl Into<String>, text: impl Into<String>) -> Self {
        Self::new(rule, Fault::Plan, place, text)
    }

    /// An input that cannot be used.
    pub fn input(rule: &'static str, place: impl Into<String>, text: impl Into<String>) -> Self {
        Self::new(rule, Fault::Input, place, text)
    }

    /// An output that cannot be written.
    pub fn output(rule: &'static str, place: impl Into<String>, text: impl Into<String>) -> Self {
        Self::new(rule, Fault::Output, place, text)
    }

    /// A defect of the program.
    pub fn defect(rule: &'static str, text: impl Into<String>) -> Self {
        Self::new(rule, Fault::Defect, "", text)
    }

    /// Adds what to do about it.
    #[must_use]
    pub fn cure(mut self, cure: impl Into<String>) -> Self {
        self.cure = cure.into();
        self
    }

    /// Adds the offending line.
    #[must_use]
    pub fn quote(mut self, quote: Quote) -> Self {
        self.quote = Some(quote);
        self
    }
}

/// One or more errors, all found before the work stopped.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Problems(pub Vec<Diagnostic>);

impl Problems {
    /// The exit code: that of the gravest fault, plan before input before output.
    pub fn exit_code(&self) -> u8 {
        self.0.iter().map(|d| d.fault).min().map_or(1, Fault::exit_code)
    }
}

impl From<Diagnostic> for Problems {
    fn from(one: Diagnostic) -> Self {
        Self(vec![one])
    }
}

impl fmt::Display for Problems {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        for d in &self.0 {
            writeln!(f, "{}: {} {}", d.place, d.text, d.cure)?;
        }
        Ok(())
    }
}

impl std::error::Error for Problems {}

/// The result of every fallible step.
pub type Outcome<T> = Result<T, Problems>;

/// Where warnings gather on the way through the rooms.
#[derive(Debug, Default, Clone)]
pub struct Warnings(pub Vec<Diagnostic>);

impl Warnings {
    /// Adds one, unless the very same was said before.
    pub fn push(&mut self, warning: Diagnostic) {
        if !self.0.contains(&warning) {
            self.0.push(warning);
        }
    }
}

/// Told how the work goes on; silent unless the caller wants to show it.
pub trait Observer: Sync {
    /// A stage begins; `total` is its number of steps, if known.
    fn begin(&self, _stage: &str, _total: Option<u64>) {}
    /// So many steps more are done.
    fn advance(&self, _steps: u64) {}
    /// The stage is over.
    fn end(&self) {}
}

/// An observer that says nothing.
#[derive(Debug, Clone, Copy)]
pub struct Silent;

impl Observer for Silent {}
