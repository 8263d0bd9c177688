//! What became of the records, and who made them.

use minijinja::{Value, context};

use crate::output::finding::Finding;
use crate::records::{Count, Rule};

use super::words;

/// The ledger of rows: every rule that applied, with its meaning.
pub(super) fn ledger(f: &Finding) -> Value {
    let l = &f.records.ledger;
    let dropped = l.read() - l.kept();
    let rows: Vec<Value> = Rule::ALL
        .iter()
        .filter(|r| l.dropped(**r) > 0)
        .map(|r| {
            context! {
                rule => r.word(), meaning => r.meaning(), count => words::count(l.dropped(*r)),
                share => words::percent(l.dropped(*r) as f64 / l.read() as f64),
            }
        })
        .collect();
    context! {
        read => words::count(l.read()), kept => words::count(l.kept()),
        kept_share => words::percent(l.kept() as f64 / l.read().max(1) as f64),
        snapped => words::count(l.snapped()), any_snapped => l.snapped() > 0, dropped => words::count(dropped),
        rows, files => f.files.iter().map(|n| words::name(n)).collect::<Vec<_>>(), facts => facts(f), dates => dates(f),
    }
}

fn fact(name: &str, value: String, note: &str) -> Value {
    context! { name, value, note }
}

/// What is counted and how it is spread over people, sources and cells.
fn facts(f: &Finding) -> Vec<Value> {
    let r = &f.records;
    let units = words::nouns(r.count).1;
    let counted = match r.count {
        Count::Visits => "one observer on one date in one cell counts once, however many records it left",
        Count::Records => "every record counts",
        Count::Places => "every cell with a record counts once",
    };
    let mut out = vec![
        fact("What is counted", format!("{} {units}", words::weight(r.weight())), counted),
        fact("Places", words::count(r.places as u64), "cells with at least one record"),
    ];
    if r.visits.count > 0 {
        out.push(fact(
            "Records a visit",
            format!(
                "{} on average, median {}",
                words::digits(r.visits.mean, 3),
                words::digits(r.visits.median, 3)
            ),
            "",
        ));
        out.push(fact(
            "Visits with a single record",
            words::percent(r.visits.single_share),
            "many of them are chance sightings rather than searches",
        ));
    }
    if let Some((first, last)) = r.reach.days {
        out.push(fact("First and last day", format!("{first} to {last}"), "of the records kept"));
    }
    out.extend(r.capped.iter().map(|c| {
        let (name, who) = match c.what {
            "observer" => ("Cap on one observer", "observers"),
            _ => ("Cap on one data set", "data sets"),
        };
        let value = format!("{}; {} of {} {who} weigh less", words::percent(c.cap), c.groups.1, c.groups.0);
        let heaviest = c.heaviest.first().map(|(n, each)| {
            format!("the heaviest, with {}, counts {} for each", words::weight(*n), words::digits(*each, 2))
        });
        fact(name, value, &heaviest.unwrap_or_default())
    }));
    let simpson = "how many there would be if all were equally active (inverse Simpson)";
    let people = |v: f64| words::digits(v, 3);
    out.extend(r.effective_observers.map(|v| fact("Effective number of observers", people(v), simpson)));
    out.extend(r.effective_datasets.map(|v| fact("Effective number of data sets", people(v), simpson)));
    let [observer, dataset, cell] = r.top_share();
    let tops = [("most active observer", observer), ("largest data set", dataset), ("busiest cell", cell)];
    out.extend(tops.into_iter().filter_map(|(name, share)| {
        Some(fact(&format!("Share of the {name}"), words::percent(share?), &format!("of all {units}")))
    }));
    out
}

/// How finely the rows are dated.
fn dates(f: &Finding) -> Vec<Value> {
    let names = ["to the day", "a range of days", "a month", "a year", "none that can be read"];
    let rows = names.into_iter().zip(f.records.dates).filter(|(_, n)| *n > 0);
    rows.map(|(name, n)| context! { name, count => words::count(n) }).collect()
}
