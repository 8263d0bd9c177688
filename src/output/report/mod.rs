//! The pages for people: `report.html` of a build, `comparison.html` of a comparison.
//!
//! Self-contained: style and images are inside, nothing is fetched, no script runs. Every text that
//! comes from data is cleaned and escaped on its way out, whatever the template does.

mod axis;
mod curves;
mod explain;
mod judged;
mod ledger;
mod map;
mod maps;
mod method;
mod palette;
mod plots;
#[cfg(test)]
mod sample;
mod words;

use minijinja::{AutoEscape, Environment, HtmlEscape, UndefinedBehavior, Value, context, escape_formatter};

use super::finding::Finding;
use super::settings::{Per, Scale};
use super::surface::Finished;

/// What a page says beside the findings.
pub struct Page {
    /// When the run began.
    pub time: String,
    /// The plan with all defaults written out.
    pub plan: String,
    /// The command as it was typed.
    pub command: String,
}

/// `report.html`: the delivered candidate.
pub fn report(finding: &Finding, finished: &Finished, page: &Page) -> String {
    let own = context! {
        verdict => judged::verdict(finding),
        cautions => judged::cautions(finding),
        facts => facts(finding, finished),
        maps => maps::of_report(finding),
        ledger => ledger::ledger(finding),
        usage => usage(finding),
        method => method::method(finding),
        delivered => words::name(&finding.chosen().name),
    };
    render("report.html", &context! { ..common(finding, page), ..own })
}

/// `comparison.html`: all candidates side by side.
pub fn comparison(finding: &Finding, page: &Page) -> String {
    let own = context! {
        recommendation => judged::recommendation(finding),
        maps => maps::of_comparison(finding),
        facts => grid_facts(finding),
        delivered => words::name(&finding.candidates[finding.verdict.chosen].name),
    };
    render("comparison.html", &context! { ..common(finding, page), ..own })
}

/// What both pages say.
fn common(f: &Finding, page: &Page) -> Value {
    let (unit, units) = words::nouns(f.records.count);
    let warnings: Vec<Value> = f
        .warnings
        .iter()
        .map(|w| context! { rule => w.rule, place => words::name(&w.place), text => w.text.as_str(), cure => w.cure.as_str() })
        .collect();
    context! {
        title => words::name(&f.title), unit, units, warnings,
        weight => words::weight(f.records.weight()),
        candidates => explain::candidates(f), count => f.candidates.len(),
        question => judged::question(f), table => judged::table(f), chart => judged::chart(f),
        folds => judged::folds(f), seed => f.seed.0, version => f.tool.version,
        libraries => f.tool.libraries.as_str(), time => words::name(&page.time), shown_time => words::time(&page.time), plan => page.plan.as_str(),
        command => page.command.as_str(), css => Value::from_safe_string(STYLE.into()),
    }
}

fn fact(name: &str, value: String) -> Value {
    context! { name, value, note => "" }
}

fn grid_facts(f: &Finding) -> Vec<Value> {
    let grid = f.region.grid();
    vec![
        fact(
            "Grid",
            format!(
                "{} × {} cells (columns × rows)",
                words::count(grid.columns as u64),
                words::count(grid.rows as u64)
            ),
        ),
        fact("Cell", maps::cell(grid)),
        fact("Coordinates", words::name(&grid.crs.label)),
        fact(
            "Region",
            format!("{} cells, {}", words::count(f.region.len() as u64), words::area(f.region.area())),
        ),
    ]
}

fn facts(f: &Finding, finished: &Finished) -> Vec<Value> {
    let value = match f.surface.per {
        Per::Cell => "effort by cell: in proportion to the chance that a background point falls in it",
        Per::Km2 => "effort per unit of area",
    };
    let scale = match f.surface.scale {
        Scale::Sum => "all cells add to 1",
        Scale::Max => "the largest is 1",
        Scale::Mean => "the mean over cells is 1",
    };
    let support = f.support_min();
    let mut out = vec![fact("Candidate", words::name(&f.chosen().name))];
    out.extend(grid_facts(f));
    out.push(fact("A cell’s value", format!("{value}; {scale}")));
    out.push(fact(
        "Range of values",
        format!("{} to {}", words::digits(finished.min, 3), words::digits(finished.max, 3)),
    ));
    out.push(fact(
        "Effective cells",
        format!(
            "{} of {}: as many equal cells would carry the same spread of weight",
            words::count(finished.effective_cells.round() as u64),
            words::count(f.region.len() as u64)
        ),
    ));
    if support.is_finite() {
        out.push(fact(
            "Least support",
            format!("about {} distinct places behind a cell’s weight", words::count(support.floor() as u64)),
        ));
    }
    out
}

/// What the section on use needs to know.
fn usage(f: &Finding) -> Value {
    let spread = maps::spread_of_areas(f);
    context! {
        per_cell => f.surface.per == Per::Cell, floor => words::percent(f.surface.floor.get()),
        has_floor => f.surface.floor.get() > 0.0, equal => spread < 1.0001, spread => words::times(spread),
    }
}

/// Escapes a message and shows what stands between its backticks as code.
fn ticks(text: &str) -> Value {
    let parts: Vec<String> = words::clean(text).split('`').map(|part| HtmlEscape(part).to_string()).collect();
    let mut out = String::new();
    for (i, part) in parts.iter().enumerate() {
        let code = i % 2 == 1 && i + 1 < parts.len();
        out += &if code { format!("<code>{part}</code>") } else { part.clone() };
    }
    Value::from_safe_string(out)
}

const STYLE: &str = include_str!("style.css");
const TEMPLATES: [(&str, &str); 4] = [
    ("page.html", include_str!("page.html")),
    ("parts.html", include_str!("parts.html")),
    ("report.html", include_str!("report.html")),
    ("comparison.html", include_str!("comparison.html")),
];

/// Fills a template; text is cleaned, then escaped, unless this room made it.
fn render(name: &str, values: &Value) -> String {
    let mut templates = Environment::new();
    templates.set_undefined_behavior(UndefinedBehavior::Strict);
    templates.set_auto_escape_callback(|_| AutoEscape::Html);
    templates.add_filter("ticks", ticks);
    templates.set_formatter(|out, state, value| match value.as_str() {
        Some(text) if !value.is_safe() => escape_formatter(out, state, &Value::from(words::clean(text))),
        _ => escape_formatter(out, state, value),
    });
    for (name, text) in TEMPLATES {
        templates.add_template(name, text).expect("the templates are tested");
    }
    let page = templates.get_template(name).and_then(|t| t.render(values));
    page.expect("the templates ask only for what they are given")
}

#[cfg(test)]
mod tests {
    use super::super::surface::finish;
    use super::*;

    fn page() -> Page {
        Page {
            time: "2026-01-02T03:04:05Z".into(),
            plan: "title = \"x\"\n\n[grid]\nlike = \"a.tif\"\n".into(),
            command: "trodden build plan.toml".into(),
        }
    }

    fn both(f: &Finding) -> [String; 2] {
        let finished = finish(&f.chosen().fitted.density, &f.region, &f.surface);
        [report(f, &finished, &page()), comparison(f, &page())]
    }

    /// With `TRODDEN_PAGES` set to a folder, the pages are written there to be looked at.
    #[test]
    fn says_all_and_asks_for_nothing() {
        let finding = sample::finding(300, 240);
        let pages = both(&finding);
        if let Some(folder) = std::env::var_os("TRODDEN_PAGES") {
            for (name, page) in ["report.html", "comparison.html"].iter().zip(&pages) {
                let path = std::path::Path::new(&folder).join(name);
                std::io::Write::write_all(&mut std::fs::File::create(path).unwrap(), page.as_bytes())
                    .unwrap();
            }
        }
        for page in &pages {
            assert!(!page.contains("http:") && !page.contains("https:"), "a page names no address");
            for mark in ["src=\"", "href=\""] {
                for rest in page.split(mark).skip(1) {
                    assert!(rest.starts_with("data:image/png;base64,") || rest.starts_with('#'));
                }
            }
            assert!(!page.contains("<script") && !page.contains("url(") && !page.contains("@import"));
            for wanted in ["lang=\"en\"", "<main", "<nav", "<header", "Skip to", "main-roads", "recorded"] {
                assert!(page.contains(wanted), "{wanted}");
            }
            assert!(page.len() < 2_000_000, "{}", page.len());
            assert!(!page.contains("NaN"), "no number is left undefined");
            let images = page.matches("<img").count();
            assert_eq!(images, page.matches("alt=\"").count(), "every image has a text");
        }
        assert_eq!(pages, both(&finding), "the same findings give the same page");
    }

    #[test]
    fn hostile_text_stays_text() {
        let mut finding = sample::finding(60, 40);
        let hostile = "</title><script>alert(1)</script>\u{202e}\u{0}'\"&<img src=x onerror=y>";
        finding.title = hostile.into();
        finding.files = vec![hostile.into(), "n".repeat(10_000)];
        finding.candidates.iter_mut().for_each(|c| c.name = format!("{hostile}{}", c.name));
        finding.layers.0.iter_mut().for_each(|l| l.unit = hostile.into());
        finding.warnings[0].text = hostile.into();
        finding.warnings[0].place = hostile.into();
        finding.warnings[0].cure = hostile.into();
        finding.tool.libraries = hostile.into();
        let finished = finish(&finding.chosen().fitted.density, &finding.region, &finding.surface);
        let page = Page { time: hostile.into(), plan: hostile.into(), command: hostile.into() };
        for html in [report(&finding, &finished, &page), comparison(&finding, &page)] {
            assert!(!html.contains("<script") && !html.contains("<img src=x"));
            assert!(!html.contains('\u{202e}') && !html.contains('\u{0}'));
            assert!(html.contains("&lt;script&gt;"));
            assert!(!html.contains(&"n".repeat(200)));
        }
    }

    /// An even surface, zeros without a floor, values per area, a candidate the plan asks for.
    #[test]
    fn odd_findings_have_pages_too() {
        let mut finding = sample::finding(60, 40);
        let last = finding.candidates.len() - 1;
        finding.surface.candidate = crate::output::settings::Choice::Named("uniform".into());
        finding.delivered = last;
        finding.surface.floor = crate::units::Share::new(0.0).unwrap();
        finding.surface.per = Per::Km2;
        finding.candidates[0].fitted.density[..500].fill(0.0);
        finding.holdout.split = crate::check::Split::Blocks;
        for standing in &mut finding.verdict.standings {
            standing.scores.iter_mut().for_each(|s| s.interval = None);
        }
        let [page, other] = both(&finding);
        assert!(page.contains("This surface is even") && page.contains("The plan asks for “uniform”"));
        assert!(page.contains("multiply it by the area") && page.contains("sets no floor"));
        finding.delivered = 0;
        let third = both(&finding);
        for page in [page, other].iter().chain(&third) {
            assert!(!page.contains("NaN") && !page.contains(">inf"));
        }
    }

    #[test]
    fn a_large_grid_gives_a_light_page() {
        let mut finding = sample::finding(60, 40);
        let side = 1000;
        let region = crate::grid::Region::new(sample::plane(side, side, 100.0), &vec![true; side * side]);
        let mut stream = crate::maths::random::Stream::new(crate::units::Seed(3), "noise", 0);
        let noise: Vec<f64> = (0..region.len()).map(|_| 0.05 + 4.0 * stream.unit()).collect();
        finding.region = std::sync::Arc::new(region);
        finding.candidates.iter_mut().for_each(|c| {
            c.fitted.density.clone_from(&noise);
            c.fitted.support = None;
            c.odds.clear();
        });
        for page in both(&finding) {
            assert!(page.len() < 2_000_000, "{}", page.len());
        }
    }
}
