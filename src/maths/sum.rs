//! Sums in a fixed order, whatever the number of threads.

use rayon::prelude::*;

/// Items per chunk; part of the result's definition, so it never depends on the machine.
pub const CHUNK: usize = 8192;

/// Compensated sum of a sequence.
///
/// # Source
/// Neumaier, A. (1974), Zeitschrift für Angewandte Mathematik und Mechanik 54, 39–51.
pub fn sum(values: impl IntoIterator<Item = f64>) -> f64 {
    let (mut total, mut lost) = (0.0_f64, 0.0_f64);
    for v in values {
        let next = total + v;
        lost += if total.abs() >= v.abs() { (total - next) + v } else { (v - next) + total };
        total = next;
    }
    total + lost
}

/// Sum of `term(i)` for `i` below `n`, in parallel.
pub fn par_sum(n: usize, term: impl Fn(usize) -> f64 + Sync) -> f64 {
    let parts: Vec<f64> = chunks(n).map(|r| r.map(&term).sum()).collect();
    sum(parts)
}

/// Sums of `K` terms at once: `add(i, &mut totals)` adds what item `i` contributes.
pub fn par_sums<const K: usize>(n: usize, add: impl Fn(usize, &mut [f64; K]) + Sync) -> [f64; K] {
    let parts: Vec<[f64; K]> = chunks(n)
        .map(|range| {
            let mut totals = [0.0; K];
            range.for_each(|i| add(i, &mut totals));
            totals
        })
        .collect();
    std::array::from_fn(|k| sum(parts.iter().map(|p| p[k])))
}

/// As [`par_sums`], for a number of totals known only at run time.
pub fn par_totals(n: usize, totals: usize, add: impl Fn(usize, &mut [f64]) + Sync) -> Vec<f64> {
    let parts: Vec<Vec<f64>> = chunks(n)
        .map(|range| {
            let mut part = vec![0.0; totals];
            range.for_each(|i| add(i, &mut part));
            part
        })
        .collect();
    (0..totals).map(|k| sum(parts.iter().map(|p| p[k]))).collect()
}

/// The ranges of fixed size that cover `0..n`, in parallel.
pub fn chunks(n: usize) -> impl IndexedParallelIterator<Item = std::ops::Range<usize>> {
    (0..n.div_ceil(CHUNK)).into_par_iter().map(move |c| c * CHUNK..((c + 1) * CHUNK).min(n))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn keeps_what_plain_addition_loses() {
        assert_eq!(sum([1.0, 1e100, 1.0, -1e100]), 2.0);
    }

    #[test]
    fn is_the_same_at_any_thread_count() {
        let term = |i: usize| 1.0 / (1.0 + i as f64);
        let run = |threads| {
            let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().unwrap();
            pool.install(|| par_sum(100_001, term)).to_bits()
        };
        assert_eq!(run(1), run(2));
        assert_eq!(run(1), run(5));
        assert!((par_sum(100_001, term) - sum((0..100_001).map(term))).abs() < 1e-12);
    }
}
