//! Says what is wrong with a plan that is no TOML, without the follow-ups of one slip.

use toml::de::{DeTable, DeValue, Error};

use super::log::{Log, Span};

/// Marks of errors after which the rest of the text is read in the wrong light.
const STRUCTURAL: [&str; 5] = ["unclosed", "missing comma", "in array", "inline table", "multi-line"];

/// Reports the parser's errors: one a line, and none that follows from an earlier one.
pub(super) fn report(log: &mut Log, document: &DeTable, errors: &[Error]) {
    let mut errors: Vec<(Span, &str)> =
        errors.iter().map(|e| (e.span().unwrap_or(0..0), e.message())).collect();
    errors.sort_by_key(|(span, _)| span.start);
    if let Some(open) = never_closed(document, &errors) {
        errors.retain(|(span, _)| span.start < open.start);
        log.say(&(open.start..open.start + 1), "syntax", "this bracket is never closed", "close it");
    }
    let mut last_line = 0;
    for (span, message) in errors {
        let line = log.line(span.start);
        if line != last_line {
            let (text, cure) = explain(log, &span, message);
            log.say(&span, "syntax", text, &cure);
        }
        last_line = line;
        if STRUCTURAL.iter().any(|mark| message.contains(mark)) {
            break;
        }
    }
}

/// A list or inline table that runs to the end of the text for want of a closing bracket.
fn never_closed(document: &DeTable, errors: &[(Span, &str)]) -> Option<Span> {
    let end = errors.iter().find(|(_, m)| m.contains("unclosed array") || m.contains("unclosed inline"))?;
    ending_at(document, end.0.start)
}

fn ending_at(table: &DeTable, end: usize) -> Option<Span> {
    table.iter().find_map(|(_, value)| match value.get_ref() {
        DeValue::Table(inner) => ending_at(inner, end).or_else(|| {
            (value.span().end == end && value.span().len() > 1 && inner.is_empty()).then(|| value.span())
        }),
        DeValue::Array(items) => {
            let tables = items.iter().filter_map(|item| item.get_ref().as_table());
            tables
                .into_iter()
                .find_map(|inner| ending_at(inner, end))
                .or_else(|| (value.span().end == end).then(|| value.span()))
        }
        _ => None,
    })
}

/// The parser's message in the words of a plan.
fn explain(log: &Log, span: &Span, message: &str) -> (String, String) {
    if message.starts_with("string values must be quoted") {
        return match log.snippet(span).filter(|found| !found.is_empty()) {
            Some(found) => {
                (format!("`{found}` is text without quotes"), format!("write it as `\"{found}\"`"))
            }
            None => ("a value is due here".into(), "write one, text in double quotes".into()),
        };
    }
    if message == "duplicate key" {
        let found = log.snippet(span).unwrap_or("this");
        let cure = "keep one of them, and write lists of tables as `[[…]]`";
        return (format!("`{found}` stands twice"), cure.into());
    }
    if message.starts_with("invalid basic string") || message.starts_with("invalid literal string") {
        return ("a text is not closed by the quote it begins with".into(), "add the closing quote".into());
    }
    if message.starts_with("unclosed table") {
        return ("the header of a table has no closing bracket".into(), "add `]`".into());
    }
    (format!("this is not TOML: {message}"), "correct the line".into())
}
