//! Signs that records are not what they seem: counted as rows pass, never mended.

/// One row that shows a sign.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Seen {
    /// Number of its file.
    pub(super) file: u32,
    /// Its line.
    pub(super) line: u64,
    /// Its coordinates as written.
    pub(super) xy: (f64, f64),
}

/// How many rows show a sign, and the first of them.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub(super) struct Sign {
    pub(super) count: u64,
    pub(super) first: Option<Seen>,
}

impl Sign {
    pub(super) fn add(&mut self, file: u32, line: u64, xy: (f64, f64), count: u64) {
        self.join(Self { count, first: (count > 0).then_some(Seen { file, line, xy }) }, 0);
    }

    /// Adds another count, whose lines are counted from `line` on.
    fn join(&mut self, other: Self, line: u64) {
        self.count += other.count;
        let theirs = other.first.map(|s| Seen { line: s.line + line, ..s });
        let key = |s: &Seen| (s.file, s.line);
        self.first = [self.first, theirs].into_iter().flatten().min_by_key(key);
    }
}

/// Another way to read coordinates.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Turn {
    /// The two are exchanged.
    Swapped,
    /// The longitude (easting) has the other sign.
    East,
    /// The latitude (northing) has the other sign.
    North,
    /// Both have.
    Both,
    /// They are in kilometres.
    Kilometres,
}

impl Turn {
    pub(super) const ALL: [Self; 5] = [Self::Swapped, Self::East, Self::North, Self::Both, Self::Kilometres];

    /// Coordinates read this way.
    pub(super) fn of(self, x: f64, y: f64) -> (f64, f64) {
        match self {
            Self::Swapped => (y, x),
            Self::East => (-x, y),
            Self::North => (x, -y),
            Self::Both => (-x, -y),
            Self::Kilometres => (x * 1000.0, y * 1000.0),
        }
    }
}

/// Steps of a lattice on which coordinates may lie: in a degree, so many steps, and how far from one a
/// coordinate may be, in steps (a minute is seldom written with all its digits).
pub(super) const DEGREES: [(f64, f64, &str); 4] = [
    (1.0, 1e-6, "1 degree"),
    (10.0, 1e-6, "0.1 degree"),
    (60.0, 4e-3, "1 minute"),
    (100.0, 1e-6, "0.01 degree"),
];
/// Where minutes stand among them.
const MINUTES: usize = 2;
/// The same for coordinates in metres or feet, by thousand units.
pub(super) const UNITS: [(f64, f64, &str); 4] = [
    (0.01, 1e-9, "100,000 units"),
    (0.1, 1e-9, "10,000 units"),
    (1.0, 1e-9, "1,000 units"),
    (10.0, 1e-9, "100 units"),
];

/// The whole number next to a coordinate, without the call that rounding costs on older processors.
fn nearest(v: f64) -> f64 {
    (v + 0.5_f64.copysign(v)) as i64 as f64
}

/// All signs.
#[derive(Debug, Clone, Default)]
pub(super) struct Signs {
    /// Kept rows in degrees, and in other units.
    pub(super) in_degrees: u64,
    pub(super) in_units: u64,
    /// Kept rows with both coordinates on a lattice, in degrees and in other units.
    pub(super) on_degrees: [Sign; 4],
    pub(super) on_units: [Sign; 4],
    /// Kept rows with equal coordinates.
    pub(super) equal: Sign,
    /// Rows outside that would be inside if read another way.
    pub(super) turned: [Sign; 5],
    /// Numbers written with a comma.
    pub(super) commas: Sign,
    /// Coordinates too large for degrees.
    pub(super) large: Sign,
    /// Dropped rows within a cell of the region.
    pub(super) near: Sign,
    /// Uncertainties of zero and less.
    pub(super) not_positive: Sign,
    /// Uncertainties that are no number.
    pub(super) no_radius: Sign,
    /// Dates that are there and cannot be read, of rows that passed.
    pub(super) no_date: Sign,
    /// Lines beyond the first of rows that could not be read.
    pub(super) swallowed: Sign,
    /// West, south, east, north of all places on the grid's CRS.
    pub(super) extent: Option<[f64; 4]>,
}

impl Signs {
    /// Looks at a row that was kept.
    pub(super) fn kept(&mut self, seen: Seen, degrees: bool) {
        let (x, y) = seen.xy;
        let (lattices, counts) = if degrees {
            self.in_degrees += 1;
            (DEGREES, &mut self.on_degrees)
        } else {
            self.in_units += 1;
            (UNITS, &mut self.on_units)
        };
        let scale = if degrees { 1.0 } else { 1e-3 };
        let on = |(steps, slack, _): &(f64, f64, &str)| {
            let off = |v: f64| (v * scale * steps - nearest(v * scale * steps)).abs();
            off(x) <= *slack && off(y) <= *slack
        };
        // every other lattice but that of minutes is part of the finest
        let finest = on(&lattices[3]);
        for (n, (lattice, sign)) in lattices.iter().zip(counts).enumerate() {
            if (finest || (degrees && n == MINUTES)) && on(lattice) {
                sign.add(seen.file, seen.line, seen.xy, 1);
            }
        }
        if x == y {
            self.equal.add(seen.file, seen.line, seen.xy, 1);
        }
    }

    /// Widens the extent.
    pub(super) fn stretch(&mut self, x: f64, y: f64) {
        if x.is_finite() && y.is_finite() {
            let [w, s, e, n] = self.extent.unwrap_or([x, y, x, y]);
            self.extent = Some([w.min(x), s.min(y), e.max(x), n.max(y)]);
        }
    }

    /// Adds the signs of a batch whose lines are counted from `line` on.
    pub(super) fn join(&mut self, other: &Self, line: u64) {
        self.in_degrees += other.in_degrees;
        self.in_units += other.in_units;
        let pairs = self.all_mut().into_iter().zip(other.all());
        pairs.for_each(|(mine, theirs)| mine.join(theirs, line));
        if let Some([w, s, e, n]) = other.extent {
            self.stretch(w, s);
            self.stretch(e, n);
        }
    }

    fn all(&self) -> [Sign; 21] {
        let mut copy = self.clone();
        copy.all_mut().map(|s| *s)
    }

    fn all_mut(&mut self) -> [&mut Sign; 21] {
        let [a, b, c, d] = &mut self.on_degrees;
        let [e, f, g, h] = &mut self.on_units;
        let [i, j, k, l, m] = &mut self.turned;
        [
            a,
            b,
            c,
            d,
            e,
            f,
            g,
            h,
            i,
            j,
            k,
            l,
            m,
            &mut self.equal,
            &mut self.commas,
            &mut self.large,
            &mut self.near,
            &mut self.not_positive,
            &mut self.no_radius,
            &mut self.no_date,
            &mut self.swallowed,
        ]
    }
}
