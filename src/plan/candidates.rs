//! Reads `[[candidate]]`.

use super::curves;
use super::keys::nearest;
use super::later::not_supported;
use super::layers::Known;
use super::log::Log;
use super::table::{Item, Table, entries};
use super::values::elements;
use crate::model::{CandidateKind, CandidatePlan, DensityPlan, Fit, TermPlan};
use crate::units::{Length, Share};

/// The keys of which a candidate has one.
const KINDS: [&str; 3] = ["density", "uses", "blend"];

/// The keys that only go with `uses`.
const WITH_USES: [&str; 3] = ["base", "remainder", "adjust"];

/// Names that stand for something else.
const RESERVED: [(&str, &str); 2] =
    [("uniform", "the baseline that is always compared"), ("best", "the choice of `[surface]`")];

/// Reads one candidate; `None` when something that was reported is wrong.
pub(super) fn read(log: &mut Log, table: &Table, layers: &[Known]) -> Option<CandidatePlan> {
    check_name(log, table);
    check_kind(log, table);
    let remainder = remainder(log, table);
    let density = density(log, table);
    let uses = uses(log, table, layers);
    let kind = match (density, uses, blend(log, table)) {
        (Some(density), None, None) => CandidateKind::Density(density),
        (None, Some(terms), None) => CandidateKind::Uses { terms, base: base(table)?, remainder },
        (None, None, Some(members)) => CandidateKind::Blend(members),
        _ => return None,
    };
    Some(CandidatePlan { name: table.string("name")?, kind })
}

fn check_name(log: &mut Log, table: &Table) {
    let Some(item) = table.item("name") else { return };
    if let Some((name, meaning)) = RESERVED.iter().find(|(name, _)| item.text() == Some(name)) {
        let text = format!("no candidate may be named `{name}`: that is {meaning}");
        log.say(&item.span(), "reserved_name", text, "give it another name");
    }
}

fn check_kind(log: &mut Log, table: &Table) {
    let present: Vec<&Item> = KINDS.iter().filter_map(|key| table.any(key)).collect();
    let cure = "give it one of `density`, `uses` and `blend`";
    match present.as_slice() {
        [] => log.say(table.span(), "candidate_kind", "this candidate says nothing of what it is", cure),
        [_] => {}
        [first, others @ ..] => {
            for other in others {
                let text = format!("a candidate cannot have both `{}` and `{}`", first.key, other.key);
                log.say(&other.at, "candidate_kind", text, &format!("{cure}, and make two candidates of it"));
            }
        }
    }
    if !table.has("uses") && !present.is_empty() {
        table.misplaced(log, &WITH_USES, |key| {
            format!("`{key}` goes with `uses`, which this candidate lacks")
        });
    }
}

/// The kernel of the remainder, where one is asked for.
fn remainder(log: &mut Log, table: &Table) -> Option<Fit<Length>> {
    let table = Table::open(log, "candidate.remainder", table.item("remainder")?.value)?;
    width(log, &table, "candidate.remainder.bandwidth")
}

/// A bandwidth: a length, or `"fit"`, which is the default.
fn width(log: &mut Log, table: &Table, section: &'static str) -> Option<Fit<Length>> {
    let Some(item) = table.item("bandwidth") else { return Some(Fit::Fitted) };
    if Table::open(log, section, item.value).is_some() {
        let cure = "write a length or `\"fit\"`";
        not_supported(log, &item.span(), "a `bandwidth` that varies over the region", cure);
    }
    match item.text()? {
        "fit" => Some(Fit::Fitted),
        text => Length::parse(text).ok().map(Fit::Given),
    }
}

fn density(log: &mut Log, table: &Table) -> Option<DensityPlan> {
    let table = Table::open(log, "candidate.density", table.item("density")?.value)?;
    width(log, &table, "candidate.density.bandwidth").map(|bandwidth| DensityPlan { bandwidth })
}

/// The candidates of a mixture; whether they exist is checked once all are known.
fn blend(log: &mut Log, table: &Table) -> Option<Vec<String>> {
    let item = table.item("blend")?;
    let mut members: Vec<String> = Vec::new();
    for element in elements(item) {
        let named = element.text().unwrap_or_default();
        if members.iter().any(|m| m == named) {
            let text = format!("the blend names `{named}` twice");
            log.say(&element.span(), "duplicate_name", text, "name each candidate once");
        }
        members.push(named.to_owned());
    }
    if members.len() == 1 {
        let text = "a blend of one candidate is that candidate";
        log.say(&item.span(), "out_of_range", text, "name at least two candidates");
    }
    Some(members)
}

fn base(table: &Table) -> Option<Fit<Share>> {
    match table.number("base") {
        Some(share) => Share::new(share).map(Fit::Given),
        None => Some(Fit::Fitted),
    }
}

/// The terms, in the order of the layers, as the order within `uses` has no meaning.
fn uses(log: &mut Log, table: &Table, layers: &[Known]) -> Option<Vec<TermPlan>> {
    let uses = table.any("uses")?.value.get_ref().as_table()?;
    let mut terms: Vec<(usize, TermPlan)> = Vec::new();
    for item in entries(uses) {
        let at = layers.iter().position(|layer| layer.name == item.key);
        if at.is_none() {
            unknown_layer(log, &item, layers);
        }
        let form = curves::read(log, &item, at.map(|at| &layers[at]));
        if let (Some(at), Some((form, parameters))) = (at, form) {
            terms.push((at, TermPlan { layer: item.key.into(), form, parameters }));
        }
    }
    terms.sort_by_key(|(at, _)| *at);
    Some(terms.into_iter().map(|(_, term)| term).collect())
}

fn unknown_layer(log: &mut Log, item: &Item, layers: &[Known]) {
    let text = format!("`uses` names `{}`, and no `[[layer]]` has that name", item.key);
    let cure = match nearest(item.key, layers.iter().map(|layer| layer.name)) {
        Some(near) => format!("the nearest layer is `{near}`"),
        None => format!("add a `[[layer]]` with `name = \"{}\"`", item.key),
    };
    log.say(&item.at, "unknown_layer", text, &cure);
}

/// Checks what blends name, once all candidates are known.
pub(super) fn check_blends(log: &mut Log, tables: &[Table]) {
    let name = |table: &Table| table.any("name").and_then(Item::text).map(String::from);
    let names: Vec<String> = tables.iter().filter_map(name).chain(["uniform".into()]).collect();
    let blends: Vec<String> = tables.iter().filter(|t| t.has("blend")).filter_map(name).collect();
    for item in tables.iter().filter_map(|table| table.item("blend")) {
        for element in elements(item) {
            let named = element.text().unwrap_or_default();
            if !names.iter().any(|name| name == named) {
                unknown_candidate(log, &element, &names);
            } else if blends.iter().any(|blend| blend == named) {
                let text = format!("`{named}` is itself a blend, and blends are not blended");
                log.say(&element.span(), "blend_of_blend", text, "name the candidates it is made of");
            }
        }
    }
}

/// Reports a name that no candidate has.
pub(super) fn unknown_candidate(log: &mut Log, item: &Item, names: &[String]) {
    let named = item.text().unwrap_or_default();
    let near = nearest(named, names.iter().map(String::as_str)).unwrap_or("uniform");
    let text = format!("`{}` names `{named}`, and no `[[candidate]]` has that name", item.key);
    log.say(&item.span(), "unknown_candidate", text, &format!("the nearest name is `{near}`"));
}
