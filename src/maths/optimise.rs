//! Search for the largest value of a function of one variable.

/// Every value tried, in the order of the variable, and the best of them.
#[derive(Debug, Clone, PartialEq)]
pub struct Search {
    /// (variable, value), ascending in the variable.
    pub tried: Vec<(f64, f64)>,
    /// Where the largest value was found.
    pub best: f64,
    /// Whether the best lies at an end of the range.
    pub at_end: Option<End>,
}

/// An end of a range.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum End {
    /// The lower one.
    Low,
    /// The upper one.
    High,
}

/// Largest value of `f` between `low` and `high`: an even grid of `steps`, then parabolas through
/// the best and its neighbours.
pub fn maximise(low: f64, high: f64, steps: usize, mut f: impl FnMut(f64) -> f64) -> Search {
    let steps = steps.max(2);
    let at = |i: usize| low + (high - low) * i as f64 / (steps - 1) as f64;
    let mut tried: Vec<(f64, f64)> = (0..steps).map(|i| (at(i), f(at(i)))).collect();
    for _ in 0..3 {
        let i = best_index(&tried);
        if i == 0 || i + 1 == tried.len() {
            break;
        }
        let Some(x) = vertex(tried[i - 1], tried[i], tried[i + 1]) else { break };
        let gap = (tried[i + 1].0 - tried[i - 1].0) * 1e-3;
        if tried.iter().any(|t| (t.0 - x).abs() < gap) {
            break;
        }
        let value = f(x);
        let place = tried.partition_point(|t| t.0 < x);
        tried.insert(place, (x, value));
    }
    let i = best_index(&tried);
    let at_end = match i {
        0 => Some(End::Low),
        _ if i + 1 == tried.len() => Some(End::High),
        _ => None,
    };
    Search { best: tried[i].0, tried, at_end }
}

/// The first of the largest values.
fn best_index(tried: &[(f64, f64)]) -> usize {
    (0..tried.len()).fold(0, |b, i| if tried[i].1 > tried[b].1 { i } else { b })
}

/// Where the parabola through three points is largest; `None` when it has no top between them.
fn vertex(a: (f64, f64), b: (f64, f64), c: (f64, f64)) -> Option<f64> {
    let (p, q) = ((b.0 - a.0) * (b.1 - c.1), (b.0 - c.0) * (b.1 - a.1));
    let x = b.0 - 0.5 * ((b.0 - a.0) * p - (b.0 - c.0) * q) / (p - q);
    (x > a.0 && x < c.0).then_some(x)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn finds_the_top_and_says_when_it_is_at_an_end() {
        let s = maximise(0.0, 10.0, 11, |x| -(x - std::f64::consts::PI).powi(2));
        assert!((s.best - std::f64::consts::PI).abs() < 1e-9 && s.at_end.is_none());
        assert_eq!(maximise(0.0, 1.0, 5, |x| x).at_end, Some(End::High));
        assert_eq!(maximise(0.0, 1.0, 5, |x| -x).at_end, Some(End::Low));
    }
}
