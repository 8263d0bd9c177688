//! The tables of a run, as CSV (RFC 4180, lines ended by a line feed).

use super::finding::Finding;

/// A number, or nothing where it is not defined.
fn number(value: Option<f64>) -> String {
    value.map_or_else(String::new, |v| v.to_string())
}

/// A text field; quoted where it must be, and kept from starting a spreadsheet formula.
fn field(text: &str) -> String {
    let text =
        if text.starts_with(['=', '+', '-', '@', '\t']) { format!("'{text}") } else { text.to_owned() };
    if text.contains([',', '"', '\n', '\r']) { format!("\"{}\"", text.replace('"', "\"\"")) } else { text }
}

/// Scores by candidate and fold.
pub fn held_out_csv(finding: &Finding) -> String {
    let mut out = String::from("candidate,fold,units,log_score,auc,boyce,calibration_slope\n");
    for c in &finding.candidates {
        for f in &c.scores.folds {
            let s = f.scores;
            let figures = [s.log_score, s.auc, s.boyce, s.calibration_slope].map(number).join(",");
            out += &format!("{},{},{},{figures}\n", c.name, f.fold, f.units);
        }
    }
    out
}

/// Every held-out unit under every candidate.
pub fn held_out_units_csv(finding: &Finding) -> String {
    let mut out = String::from("unit,column,row,fold,candidate,log_density\n");
    for c in &finding.candidates {
        for u in &c.scores.units {
            let (column, row) = finding.region.position(u.what.cell as usize);
            out += &format!("{},{column},{row},{},{},{}\n", u.unit + 1, u.fold, c.name, u.log_density);
        }
    }
    out
}

/// The records kept, with their cell and visit.
pub fn kept_csv(finding: &Finding) -> String {
    let mut out = String::from("file,line,column,row,visit\n");
    for k in &finding.kept {
        let (column, row) = finding.region.position(k.cell as usize);
        out += &format!("{},{},{column},{row},{}\n", field(&finding.files[k.file]), k.line, k.visit);
    }
    out
}

/// The standing of the candidates, best first.
pub fn comparison_csv(finding: &Finding) -> String {
    let mut out = String::from("rank,candidate,fitted_parameters");
    for score in ["log_score", "auc", "boyce", "calibration_slope", "versus_best"] {
        out += &format!(",{score},{score}_low,{score}_high");
    }
    out += ",distinguishable\n";
    let mut standings: Vec<_> = finding.verdict.standings.iter().collect();
    standings.sort_by_key(|s| s.rank);
    for s in standings {
        let c = &finding.candidates[s.candidate];
        out += &format!("{},{},{}", s.rank, c.name, c.fitted.complexity);
        for e in s.scores.iter().chain([&s.versus_best]) {
            let ends = [e.value, e.interval.map(|i| i.0), e.interval.map(|i| i.1)];
            out += &format!(",{}", ends.map(number).join(","));
        }
        out += &format!(",{}\n", s.distinguishable);
    }
    out
}
