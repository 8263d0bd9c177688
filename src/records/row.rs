//! One row of a record file, as the gate hands it in.

/// A row, readable or not.
pub struct Row<'a> {
    /// Line of a text from 1, counted from where its batch begins; or feature id.
    pub line: u64,
    /// What it holds.
    pub content: Content<'a>,
}

/// What a row holds.
#[allow(clippy::large_enum_variant, reason = "one row lives at a time, on the stack")]
pub enum Content<'a> {
    /// Nothing that can be read, why, and over how many lines it runs.
    Unreadable(&'a str, u64),
    /// The fields asked for.
    Fields(Fields<'a>),
}

/// Where a row says it was.
#[derive(Debug, Clone, Copy)]
pub enum Place<'a> {
    /// Two fields of text.
    Text {
        /// Longitude or easting.
        x: &'a str,
        /// Latitude or northing.
        y: &'a str,
    },
    /// A point geometry.
    Point(f64, f64),
    /// A feature without geometry.
    Missing,
}

/// The fields of a row that matter; a column that does not exist reads as empty.
pub struct Fields<'a> {
    /// The place.
    pub place: Place<'a>,
    /// Date of the event.
    pub date: &'a str,
    /// Year, month and day in columns of their own.
    pub year_month_day: [&'a str; 3],
    /// Who observed.
    pub observer: &'a str,
    /// Which data set.
    pub dataset: &'a str,
    /// Radius of uncertainty.
    pub uncertainty: &'a str,
    /// Occurrence status.
    pub status: &'a str,
    /// Number of individuals.
    pub individuals: &'a str,
    /// Whether the coordinates are degrees; `None`: as the plan's CRS says.
    pub degrees: Option<bool>,
    /// Geodetic datum of the coordinates; empty: the plan's.
    pub datum: &'a str,
    /// Columns named in `keep`, in the plan's order, then those in `leave_out`.
    pub filters: &'a [&'a str],
}

/// Text without the white space around it; nearly all has none.
pub(super) fn trimmed(text: &str) -> &str {
    let plain = |end: Option<&u8>| end.is_none_or(u8::is_ascii_graphic);
    if plain(text.as_bytes().first()) && plain(text.as_bytes().last()) { text } else { text.trim() }
}
