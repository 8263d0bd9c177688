//! Whatever a table holds: a whole answer or an error, and no row lost.

use proptest::prelude::*;

use super::common::World;
use super::{PLAN, accounted};

/// Fields that tables hold, and some that none should.
fn field() -> impl Strategy<Value = String> {
    prop_oneof![
        4 => (9.0..9.06_f64).prop_map(|v| format!("{v:.5}")),
        4 => (45.12..45.16_f64).prop_map(|v| format!("{v:.5}")),
        1 => Just(String::new()),
        1 => prop::sample::select(vec![
            "0", "-0", "1e400", "-1e-400", "NaN", "inf", "12,5", "9 ", " 45.14", "0x1F", "+9.01", "1_000", "٩",
            "2019-05-06", "2019-02-30", "20190506", "2019-05-06/04", "/", "--", "2019-W60", "absent", "ABSENT",
            "\"", "\"\"", "\"a\nb\"", "\"a", "b\"", "'", "\u{feff}", "é", "\u{0}", "a|b", "| |", "-", "\\N", "NA",
        ])
        .prop_map(str::to_owned),
    ]
}

fn row() -> impl Strategy<Value = String> {
    (prop::collection::vec(field(), 5..=8), prop::sample::select(vec!["\n", "\r\n", "\n\n"]))
        .prop_map(|(fields, end)| fields.join(",") + end)
}

/// Rows that are sound most of the time.
fn sound() -> impl Strategy<Value = String> {
    let place = (9.001..9.049_f64, 45.129..45.151_f64);
    (place, field(), field(), 1..13_u32, 1..29_u32).prop_map(|((x, y), who, radius, month, day)| {
        format!("{x:.5},{y:.5},2019-{month:02}-{day:02},{who},{radius},k,present\n")
    })
}

const HEADER: &str = concat!(
    "decimalLongitude,decimalLatitude,eventDate,recordedBy,",
    "coordinateUncertaintyInMeters,scientificName,occurrenceStatus"
);

/// A build ends with an answer in which all rows stand, or with an error about plan or input.
fn answered(bytes: &[u8]) {
    let world = World::new();
    world.put_bytes("records.csv", bytes);
    world.put("plan.toml", &PLAN.replace("RECORDS", "file = \"records.csv\""));
    let built = world.run(&["build", "plan.toml", "--json"]);
    assert!(!built.stderr.contains("panicked"), "{}", built.stderr);
    match built.code {
        Some(0) => accounted(&world, &built.json()["records"]),
        Some(2 | 3) => {
            assert!(
                built.stderr.contains("records.csv") || built.stderr.contains("fold"),
                "{}",
                built.stderr
            );
            assert!(world.files("out").is_empty());
        }
        code => panic!("ended with {code:?}: {}", built.stderr),
    }
}

fn few() -> ProptestConfig {
    ProptestConfig { cases: 16, failure_persistence: None, max_shrink_iters: 60, ..ProptestConfig::default() }
}

proptest! {
    #![proptest_config(few())]

    #[test]
    fn arbitrary_cells(
        sound in prop::collection::vec(sound(), 20..60),
        wild in prop::collection::vec(row(), 0..30),
    ) {
        let mut lines: Vec<String> = sound;
        for (n, row) in wild.into_iter().enumerate() {
            lines.insert(n * 7 % lines.len(), row);
        }
        answered(format!("{HEADER}\n{}", lines.concat()).as_bytes());
    }

    #[test]
    fn arbitrary_bytes(
        sound in prop::collection::vec(sound(), 20..40),
        wild in prop::collection::vec(any::<u8>(), 0..400),
        at in 0..20_usize,
    ) {
        let (before, after) = (sound[..at].concat(), sound[at..].concat());
        let bytes = [HEADER.as_bytes(), b"\n", before.as_bytes(), &wild, b"\n", after.as_bytes()].concat();
        answered(&bytes);
    }

    #[test]
    fn nothing_but_bytes(bytes in prop::collection::vec(any::<u8>(), 1..300)) {
        answered(&bytes);
    }
}
