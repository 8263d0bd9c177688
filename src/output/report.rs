//! The page for people.

use super::finding::Finding;
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

/// `report.html`.
pub fn report(_finding: &Finding, _finished: &Finished, page: &Page) -> String {
    page.plan.clone()
}

/// `comparison.html`.
pub fn comparison(_finding: &Finding, page: &Page) -> String {
    page.plan.clone()
}
