//! Gathers what is wrong with a plan, each with its place in the text.

use std::ops::Range;

use crate::diag::{Diagnostic, Problems, Quote};

/// A stretch of the plan's text, in bytes.
pub(super) type Span = Range<usize>;

/// The problems found so far.
pub(super) struct Log<'t> {
    text: &'t str,
    file: &'t str,
    found: Vec<(usize, Diagnostic)>,
}

impl<'t> Log<'t> {
    /// Nothing found yet.
    pub(super) fn new(text: &'t str, file: &'t str) -> Self {
        Self { text, file, found: Vec::new() }
    }

    /// Adds a problem that lies at `span`.
    pub(super) fn say(&mut self, span: &Span, rule: &'static str, text: impl Into<String>, cure: &str) {
        let quote = self.quote(span);
        let place = format!("{}:{}:{}", self.file, quote.line, quote.column);
        let problem = Diagnostic::plan(rule, place, text).cure(cure).quote(quote);
        self.found.push((span.start, problem));
    }

    /// Adds a problem of the plan as a whole, with nothing to quote.
    pub(super) fn say_whole(&mut self, rule: &'static str, text: impl Into<String>, cure: &str) {
        let place = format!("{}:1:1", self.file);
        self.found.push((0, Diagnostic::plan(rule, place, text).cure(cure)));
    }

    /// How many problems were found.
    pub(super) fn count(&self) -> usize {
        self.found.len()
    }

    /// The line a byte stands in, from 1.
    pub(super) fn line(&self, at: usize) -> usize {
        self.head(at).matches('\n').count() + 1
    }

    /// What the plan says at `span`; `None` where that is long or goes over several lines.
    pub(super) fn snippet(&self, span: &Span) -> Option<&'t str> {
        let part = self.text.get(span.clone())?;
        (!part.contains('\n') && part.chars().count() <= 40).then_some(part)
    }

    /// The problems, in the order of the text.
    pub(super) fn into_problems(mut self) -> Option<Problems> {
        self.found.sort_by_key(|(at, _)| *at);
        let problems: Vec<Diagnostic> = self.found.into_iter().map(|(_, problem)| problem).collect();
        (!problems.is_empty()).then_some(Problems(problems))
    }

    /// The text before a byte (before the character that holds it).
    fn head(&self, at: usize) -> &'t str {
        let mut at = at.min(self.text.len());
        while !self.text.is_char_boundary(at) {
            at -= 1;
        }
        &self.text[..at]
    }

    fn quote(&self, span: &Span) -> Quote {
        let head = self.head(span.start);
        let start = head.rfind('\n').map_or(0, |newline| newline + 1);
        let whole = self.text[start..].split('\n').next().unwrap_or_default();
        let whole = whole.strip_suffix('\r').unwrap_or(whole);
        let shown = whole.strip_prefix('\u{feff}').unwrap_or(whole);
        let column = head[start..].trim_start_matches('\u{feff}').chars().count() + 1;
        let marked = self.text.get(span.clone()).unwrap_or_default().lines().next().unwrap_or_default();
        let room = (shown.chars().count() + 1).saturating_sub(column).max(1);
        let width = marked.chars().count().clamp(1, room);
        Quote { line: self.line(span.start), column, width, text: shown.into() }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn counts_characters_and_lines() {
        let text = "a = 1\r\nträger = \"é\"\r\n";
        let at = text.find('"').unwrap();
        let log = Log::new(text, "p.toml");
        let quote = log.quote(&(at..at + 4));
        assert_eq!(quote, Quote { line: 2, column: 10, width: 3, text: "träger = \"é\"".into() });
    }

    #[test]
    fn a_marker_stays_in_its_line() {
        let text = "title = \"\"\"a\nb\"\"\"";
        let quote = Log::new(text, "p.toml").quote(&(8..text.len()));
        assert_eq!((quote.column, quote.width), (9, 4));
        let end = Log::new("a\n", "p.toml").quote(&(2..2));
        assert_eq!((end.line, end.column, end.width, end.text.as_str()), (2, 1, 1, ""));
    }
}
