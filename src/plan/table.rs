//! One table of a plan: its keys are checked when it is opened, and read without further ado after.

use toml::Spanned;
use toml::de::{DeTable, DeValue};

use super::keys::{Key, SECTIONS, find, heading, keys_of, listed, nearest};
use super::later;
use super::log::{Log, Span};
use super::values::{self, validate};

/// A key with its value.
#[derive(Clone)]
pub(super) struct Item<'t> {
    /// The key, or the name of a column or layer.
    pub(super) key: &'t str,
    /// Where the key stands.
    pub(super) at: Span,
    /// What stands behind it.
    pub(super) value: &'t Spanned<DeValue<'t>>,
    /// Whether the value is of the right kind.
    pub(super) sound: bool,
}

impl<'t> Item<'t> {
    /// Where the value stands.
    pub(super) fn span(&self) -> Span {
        self.value.span()
    }

    /// The value, if it is text.
    pub(super) fn text(&self) -> Option<&'t str> {
        self.value.get_ref().as_str()
    }
}

/// The entries of a table, in the order of the text.
pub(super) fn entries<'t>(table: &'t DeTable<'t>) -> Vec<Item<'t>> {
    let item = |(key, value): (&'t Spanned<_>, &'t Spanned<DeValue<'t>>)| {
        let name: &'t std::borrow::Cow<'t, str> = key.get_ref();
        Item { key: name, at: key.span(), value, sound: true }
    };
    let mut items: Vec<Item> = table.iter().map(item).collect();
    items.sort_by_key(|item| item.at.start);
    items
}

/// A table whose keys are fixed.
pub(super) struct Table<'t> {
    section: &'static str,
    span: Span,
    items: Vec<Item<'t>>,
}

impl<'t> Table<'t> {
    /// Opens the whole plan.
    pub(super) fn top(log: &mut Log, document: &'t DeTable<'t>) -> Self {
        Self::of(log, "", 0..0, document)
    }

    /// Opens a value as the table `section`; reports when it is none.
    pub(super) fn open(
        log: &mut Log,
        section: &'static str,
        value: &'t Spanned<DeValue<'t>>,
    ) -> Option<Self> {
        let table = value.get_ref().as_table()?;
        Some(Self::of(log, section, value.span(), table))
    }

    fn of(log: &mut Log, section: &'static str, span: Span, table: &'t DeTable<'t>) -> Self {
        let mut items = entries(table);
        for item in &mut items {
            item.sound = match find(section, item.key) {
                Some(known) => check(log, known, item),
                None => unknown(log, section, item),
            };
        }
        let table = Self { section, span, items };
        for key in keys_of(section).filter(|key| key.required) {
            table.require(log, key.name);
        }
        table
    }

    /// Reports the key missing unless it is there.
    pub(super) fn require(&self, log: &mut Log, name: &str) {
        if self.has(name) {
            return;
        }
        let meaning = find(self.section, name).map_or("", |key| key.meaning);
        if self.section.is_empty() {
            let (text, cure) = whole_missing(name, meaning);
            log.say_whole("missing_key", text, &cure);
        } else {
            let text = format!("{} has no `{name}`", heading(self.section));
            log.say(&self.span, "missing_key", text, &format!("add `{name}`: {meaning}"));
        }
    }

    /// Where the table begins.
    pub(super) fn span(&self) -> &Span {
        &self.span
    }

    /// Whether the key is there, sound or not.
    pub(super) fn has(&self, key: &str) -> bool {
        self.any(key).is_some()
    }

    /// The entry, sound or not.
    pub(super) fn any(&self, key: &str) -> Option<&Item<'t>> {
        self.items.iter().find(|item| item.key == key)
    }

    /// The entry, if it is of the right kind.
    pub(super) fn item(&self, key: &str) -> Option<&Item<'t>> {
        self.any(key).filter(|item| item.sound)
    }

    /// A text.
    pub(super) fn text(&self, key: &str) -> Option<&'t str> {
        self.item(key)?.text()
    }

    /// A text of one's own.
    pub(super) fn string(&self, key: &str) -> Option<String> {
        self.text(key).map(String::from)
    }

    /// A flag.
    pub(super) fn flag(&self, key: &str) -> Option<bool> {
        self.item(key)?.value.get_ref().as_bool()
    }

    /// A whole number.
    pub(super) fn whole(&self, key: &str) -> Option<i64> {
        values::integer(self.item(key)?.value.get_ref())
    }

    /// A number.
    pub(super) fn number(&self, key: &str) -> Option<f64> {
        values::real(self.item(key)?.value.get_ref())
    }

    /// Reports every key of `names` that stands in this table as out of place there.
    pub(super) fn misplaced(&self, log: &mut Log, names: &[&str], why: impl Fn(&str) -> String) {
        for item in self.items.iter().filter(|item| names.contains(&item.key)) {
            log.say(&item.at, "misplaced_key", why(item.key), &format!("remove `{}`", item.key));
        }
    }
}

fn check(log: &mut Log, known: &Key, item: &Item) -> bool {
    let before = log.count();
    validate(log, known, item);
    let sound = log.count() == before;
    if sound {
        later::refuse(log, known, item);
    }
    sound
}

fn whole_missing(name: &str, meaning: &str) -> (String, String) {
    match name {
        "candidate" => (
            "the plan has no `[[candidate]]`, so that only `uniform` could be compared".into(),
            "add a `[[candidate]]` with `density` or `uses`".into(),
        ),
        "grid" | "records" => (format!("the plan has no `[{name}]`"), format!("add `[{name}]`: {meaning}")),
        _ => (format!("the plan has no `{name}`"), format!("add `{name}` at the top: {meaning}")),
    }
}

/// So many slips of the pen apart, the nearest key is surely the one that was meant.
const FEW_SLIPS: usize = 2;

/// Reports a key that is not known here; `false`, as it can't be read.
fn unknown(log: &mut Log, section: &str, item: &Item) -> bool {
    let here = heading(section);
    let elsewhere = SECTIONS.iter().filter(|(name, _)| find(name, item.key).is_some());
    let elsewhere: Vec<&str> = elsewhere.map(|(_, heading)| *heading).collect();
    let near = nearest(item.key, keys_of(section).map(|key| key.name));
    let mut cure = match elsewhere.as_slice() {
        [] => String::new(),
        places => format!("`{}` belongs in {}; ", item.key, places.join(" or ")),
    };
    if let Some(near) = near {
        cure += &format!("the nearest key here is `{near}`");
        if elsewhere.is_empty() && strsim::damerau_levenshtein(near, item.key) > FEW_SLIPS {
            cure += &format!(" (known here: {})", listed(keys_of(section).map(|key| key.name), "and"));
        }
    }
    log.say(&item.at, "unknown_key", format!("`{}` is no key of {here}", item.key), &cure);
    false
}
