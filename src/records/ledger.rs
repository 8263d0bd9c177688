//! What became of every row read.

/// Why a record was dropped, in the order in which the first that applies counts.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub enum Rule {
    /// Wrong number of fields, or bytes that are no text.
    UnreadableRow,
    /// The record says that nothing was found.
    Absent,
    /// No coordinates.
    NoCoordinate,
    /// Coordinates that are no numbers, or out of range.
    ImpossibleCoordinate,
    /// Both coordinates are exactly zero.
    ZeroZero,
    /// Uncertainty above the plan's limit.
    TooVague,
    /// No readable date, where the plan limits dates.
    NoDate,
    /// Not wholly inside the plan's dates.
    OutsideDates,
    /// Named in `leave_out`.
    LeftOut,
    /// Not named in `keep`.
    NotKept,
    /// Outside the grid.
    OutsideGrid,
    /// On the grid but outside the region.
    OutsideRegion,
}

impl Rule {
    /// All rules, in their order.
    pub const ALL: [Self; 12] = [
        Self::UnreadableRow,
        Self::Absent,
        Self::NoCoordinate,
        Self::ImpossibleCoordinate,
        Self::ZeroZero,
        Self::TooVague,
        Self::NoDate,
        Self::OutsideDates,
        Self::LeftOut,
        Self::NotKept,
        Self::OutsideGrid,
        Self::OutsideRegion,
    ];

    /// The name results use.
    pub fn word(self) -> &'static str {
        match self {
            Self::UnreadableRow => "unreadable_row",
            Self::Absent => "absent",
            Self::NoCoordinate => "no_coordinate",
            Self::ImpossibleCoordinate => "impossible_coordinate",
            Self::ZeroZero => "zero_zero",
            Self::TooVague => "too_vague",
            Self::NoDate => "no_date",
            Self::OutsideDates => "outside_dates",
            Self::LeftOut => "left_out",
            Self::NotKept => "not_kept",
            Self::OutsideGrid => "outside_grid",
            Self::OutsideRegion => "outside_region",
        }
    }

    /// What it means, for people.
    pub fn meaning(self) -> &'static str {
        match self {
            Self::UnreadableRow => "wrong number of fields, or bytes that are no text",
            Self::Absent => "says that nothing was found",
            Self::NoCoordinate => "no coordinates",
            Self::ImpossibleCoordinate => "coordinates that are no numbers, or out of range",
            Self::ZeroZero => "both coordinates exactly zero",
            Self::TooVague => "vaguer than the plan allows",
            Self::NoDate => "no readable date, where the plan limits dates",
            Self::OutsideDates => "not wholly inside the plan's dates",
            Self::LeftOut => "named in `leave_out`",
            Self::NotKept => "not named in `keep`",
            Self::OutsideGrid => "outside the grid",
            Self::OutsideRegion => "on the grid, outside the region",
        }
    }
}

/// Counts of rows read, kept and dropped; `read = kept + Σ dropped` holds by construction.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub struct Ledger {
    kept: u64,
    snapped: u64,
    dropped: [u64; Rule::ALL.len()],
}

impl Ledger {
    /// Counts a kept record.
    pub fn keep(&mut self, snapped: bool) {
        self.kept += 1;
        self.snapped += u64::from(snapped);
    }

    /// Counts a dropped record.
    pub fn drop(&mut self, rule: Rule) {
        self.dropped[rule as usize] += 1;
    }

    /// Adds the counts of another ledger.
    pub fn join(&mut self, other: &Self) {
        self.kept += other.kept;
        self.snapped += other.snapped;
        self.dropped.iter_mut().zip(other.dropped).for_each(|(mine, theirs)| *mine += theirs);
    }

    /// Rows read.
    pub fn read(&self) -> u64 {
        self.kept + self.dropped.iter().sum::<u64>()
    }

    /// Records kept.
    pub fn kept(&self) -> u64 {
        self.kept
    }

    /// Of them, moved to the nearest inside cell.
    pub fn snapped(&self) -> u64 {
        self.snapped
    }

    /// Records dropped by a rule.
    pub fn dropped(&self, rule: Rule) -> u64 {
        self.dropped[rule as usize]
    }

    /// The ledger in words, one line a rule that applied.
    pub fn lines(&self) -> Vec<String> {
        let mut lines = vec![format!("read {}, kept {}", self.read(), self.kept)];
        lines.extend(
            Rule::ALL
                .iter()
                .filter(|r| self.dropped(**r) > 0)
                .map(|r| format!("{} {}: {}", r.word(), self.dropped(*r), r.meaning())),
        );
        lines
    }
}
