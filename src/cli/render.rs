//! How messages look: plain words first, colour only as an addition.

use std::io::{IsTerminal, Write};

use trodden::diag::Diagnostic;

use super::args::Color;

/// How the program speaks.
#[derive(Clone, Copy)]
pub struct Voice {
    colour: bool,
    quiet: bool,
}

impl Voice {
    pub fn new(when: Color, quiet: bool) -> Self {
        let colour = match when {
            Color::Always => true,
            Color::Never => false,
            Color::Auto => {
                std::io::stderr().is_terminal() && std::env::var_os("NO_COLOR").is_none_or(|v| v.is_empty())
            }
        };
        Self { colour, quiet }
    }

    /// Whether progress may be shown.
    pub fn shows_progress(self) -> bool {
        !self.quiet && std::io::stderr().is_terminal()
    }

    pub fn error(self, d: &Diagnostic) {
        self.say("error", "31", d);
    }

    pub fn warning(self, d: &Diagnostic) {
        if !self.quiet {
            self.say("warning", "33", d);
        }
    }

    /// A defect of the program, with a plea to report it.
    pub fn defect(self, what: &str) {
        self.line(&format!(
            "{}: this is a defect of trodden, not of your data: {what}\n  please report it with the plan and this message",
            self.paint("error", "31")
        ));
    }

    fn say(self, word: &str, colour: &str, d: &Diagnostic) {
        let place = if d.place.is_empty() { String::new() } else { format!("{}: ", printable(&d.place)) };
        let mut text = format!("{}[{}]: {place}{}", self.paint(word, colour), d.rule, printable(&d.text));
        if let Some(q) = &d.quote {
            let number = q.line.to_string();
            let gap = " ".repeat(number.len());
            let lead = " ".repeat(q.column.saturating_sub(1));
            let mark = self.paint(&"^".repeat(q.width.max(1)), colour);
            text += &format!("\n {gap} |\n {number} | {}\n {gap} | {lead}{mark}", printable(&q.text));
        }
        if !d.cure.is_empty() {
            text += &format!("\n  {}: {}", self.paint("to do", "36"), printable(&d.cure));
        }
        self.line(&text);
    }

    fn paint(self, text: &str, colour: &str) -> String {
        if self.colour { format!("\x1b[1;{colour}m{text}\x1b[0m") } else { text.to_owned() }
    }

    /// One message on stderr.
    pub fn line(self, text: &str) {
        // nobody is left to tell when stderr is closed
        drop(writeln!(std::io::stderr().lock(), "{text}"));
    }
}

/// The result on stdout.
pub fn result(text: &str) {
    // a closed pipe (`| head`) is the reader's wish
    drop(writeln!(std::io::stdout().lock(), "{text}"));
}

/// Text without control characters, which could move a terminal's cursor.
fn printable(text: &str) -> String {
    text.chars().map(|c| if c.is_control() && c != '\n' && c != '\t' { '\u{fffd}' } else { c }).collect()
}
