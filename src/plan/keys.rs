//! What a key of a plan is, and how keys are looked up; the keys themselves stand in `known`.

use super::known::KEYS;

/// Whether this version does what a key asks for.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Since {
    /// It does.
    Now,
    /// It does not: the key is refused.
    Later,
    /// Only this value, as the plan would write it, is honoured.
    Only(&'static str),
}

/// Which numbers are legal.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Bounds {
    /// All finite ones.
    Any,
    /// Zero and more.
    NotNegative,
    /// More than zero.
    Positive,
}

/// Which lengths are legal, and which words in their place.
#[derive(Debug, Clone, Copy)]
pub(super) struct Lengths {
    /// Units that fit.
    pub(super) units: &'static [&'static str],
    /// Whether zero is one.
    pub(super) zero: bool,
    /// Words that may stand instead.
    pub(super) words: &'static [&'static str],
    /// Words that later versions will know.
    pub(super) later: &'static [&'static str],
}

/// Words to choose from.
#[derive(Debug, Clone, Copy)]
pub(super) struct Choice {
    /// Words of this version.
    pub(super) now: &'static [&'static str],
    /// Words that later versions will know.
    pub(super) later: &'static [&'static str],
    /// What the words stand for, in the plural; empty: the key itself is named.
    pub(super) noun: &'static str,
}

/// What a key holds.
#[derive(Debug, Clone, Copy)]
pub(super) enum Kind {
    /// Text that is not empty.
    Text,
    /// A coordinate reference system.
    Crs,
    /// A name that may be part of a file's name.
    Name,
    /// A file or folder.
    Path,
    /// One or several files of records.
    RecordFiles,
    /// A list of files.
    PathList,
    /// A list of words.
    Words,
    /// `true` or `false`.
    Flag,
    /// A whole number between two bounds.
    Whole(i64, i64),
    /// A number.
    Number(Bounds),
    /// A number, or `"fit"`.
    Fitted(Bounds),
    /// A share from 0 to below 1.
    Share,
    /// Such a share, or `"fit"`.
    FittedShare,
    /// A length.
    Length(Lengths),
    /// The width of a kernel.
    Bandwidth(Lengths),
    /// The scale of a curve, in the unit of its layer.
    Scale,
    /// One of several words.
    Choice(Choice),
    /// A date or a range of dates.
    Dates,
    /// Columns and the values looked for in them.
    Values,
    /// Shares of the whole, as text with `%`.
    Shares,
    /// A speed.
    Speed,
    /// Classes and their speeds.
    Speeds,
    /// A table of fixed keys.
    Table,
    /// A list of such tables.
    Tables,
    /// Layers, each with a table of fixed keys.
    Terms,
}

/// One key of a plan.
#[derive(Debug, Clone, Copy)]
pub(super) struct Key {
    /// The table it stands in, `""` for the top.
    pub(super) section: &'static str,
    /// The key.
    pub(super) name: &'static str,
    /// What it holds.
    pub(super) kind: Kind,
    /// Whether it must be there.
    pub(super) required: bool,
    /// Whether this version does what it asks for.
    pub(super) since: Since,
    /// What holds when it is absent.
    pub(super) default: &'static str,
    /// What it means, in one line.
    pub(super) meaning: &'static str,
}

impl Key {
    /// A key that may be absent.
    pub(super) const fn new(
        section: &'static str,
        name: &'static str,
        kind: Kind,
        default: &'static str,
        meaning: &'static str,
    ) -> Self {
        Self { section, name, kind, required: false, since: Since::Now, default, meaning }
    }

    /// The same key, which must be there.
    pub(super) const fn required(mut self) -> Self {
        self.required = true;
        self
    }

    /// The same key, refused by this version.
    pub(super) const fn later(mut self) -> Self {
        self.since = Since::Later;
        self
    }

    /// The same key, of which this version honours one value.
    pub(super) const fn only(mut self, value: &'static str) -> Self {
        self.since = Since::Only(value);
        self
    }
}

/// The tables of a plan and what messages call them, in the order of the reference.
pub(super) const SECTIONS: [(&str, &str); 18] = [
    ("", "the plan's top level"),
    ("grid", "`[grid]`"),
    ("records", "`[records]`"),
    ("records.source", "`[[records.source]]`"),
    ("layer", "`[[layer]]`"),
    ("layer.travel", "`[layer.travel]`"),
    ("layer.travel.roads", "`roads` of `[layer.travel]`"),
    ("layer.travel.cover", "`cover` of `[layer.travel]`"),
    ("candidate", "`[[candidate]]`"),
    ("candidate.density", "`density` of `[[candidate]]`"),
    ("candidate.density.bandwidth", "`bandwidth` of `density`"),
    ("candidate.uses", "a layer in `uses` of `[[candidate]]`"),
    ("candidate.remainder", "`remainder` of `[[candidate]]`"),
    ("candidate.remainder.bandwidth", "`bandwidth` of `remainder`"),
    ("holdout", "`[holdout]`"),
    ("environment", "`[environment]`"),
    ("surface", "`[surface]`"),
    ("output", "`[output]`"),
];

/// What messages call a table.
pub(super) fn heading(section: &str) -> &'static str {
    SECTIONS.iter().find(|(name, _)| *name == section).map_or("the plan", |(_, heading)| heading)
}

/// The keys of one table.
pub(super) fn keys_of(section: &str) -> impl Iterator<Item = &'static Key> {
    KEYS.iter().filter(move |key| key.section == section)
}

/// The key of this name in a table.
pub(super) fn find(section: &str, name: &str) -> Option<&'static Key> {
    keys_of(section).find(|key| key.name == name)
}

/// The word most like `word`, if there is any to choose from.
pub(super) fn nearest<'w>(word: &str, words: impl IntoIterator<Item = &'w str>) -> Option<&'w str> {
    let word = word.to_lowercase();
    let likeness = |other: &str| {
        let other = other.to_lowercase();
        strsim::jaro_winkler(&word, &other) + strsim::normalized_damerau_levenshtein(&word, &other)
    };
    let best = |best: Option<(&'w str, f64)>, other: &'w str| {
        let new = likeness(other);
        if best.is_none_or(|(_, old)| new > old) { Some((other, new)) } else { best }
    };
    words.into_iter().fold(None, best).map(|(word, _)| word)
}

/// "`a`, `b` and `c`".
pub(super) fn listed<'w>(words: impl IntoIterator<Item = &'w str>, link: &str) -> String {
    let quoted: Vec<String> = words.into_iter().map(|word| format!("`{word}`")).collect();
    match quoted.split_last() {
        None => String::new(),
        Some((only, [])) => only.clone(),
        Some((last, rest)) => format!("{} {link} {last}", rest.join(", ")),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_key_stands_in_a_known_table_once() {
        for (n, key) in KEYS.iter().enumerate() {
            assert!(SECTIONS.iter().any(|(name, _)| *name == key.section), "{}", key.section);
            let again = KEYS[n + 1..].iter().any(|k| (k.section, k.name) == (key.section, key.name));
            assert!(!again, "{}.{}", key.section, key.name);
            assert!(!key.meaning.is_empty() && !key.meaning.ends_with('.'), "{}", key.name);
        }
    }

    #[test]
    fn finds_the_nearest_word() {
        let known = || keys_of("records").map(|key| key.name);
        assert_eq!(nearest("longitud", known()), Some("longitude"));
        assert_eq!(nearest("lat", known()), Some("latitude"));
        assert_eq!(nearest("max_uncertanty", known()), Some("max_uncertainty"));
        assert_eq!(nearest("leaveout", known()), Some("leave_out"));
        assert_eq!(nearest("x", []), None);
    }

    #[test]
    fn lists_words() {
        assert_eq!(listed(["a"], "or"), "`a`");
        assert_eq!(listed(["a", "b", "c"], "or"), "`a`, `b` or `c`");
    }
}
