//! Choices of places to begin a search with.

use crate::maths::float;
use crate::maths::random::Stream;

use super::conflicts::Conflicts;

/// The places in the order of their distance along a random direction: taken one after another they
/// pack closely, since each leaves room on one side only.
///
/// # Source
/// Marathe, M. V., Breu, H., Hunt, H. B., Ravi, S. S. & Rosenkrantz, D. J. (1995), Simple heuristics
/// for unit disk graphs, Networks 25, 59–68.
pub fn sweep(conflicts: &Conflicts, stream: &mut Stream) -> Vec<u32> {
    let way = direction(stream);
    let along = |place: u32| -> f64 { conflicts.point(place).iter().zip(way).map(|(c, w)| c * w).sum() };
    let mut order: Vec<(f64, u32)> = (0..conflicts.len as u32).map(|p| (along(p), p)).collect();
    order.sort_unstable_by(|a, b| a.0.total_cmp(&b.0).then(a.1.cmp(&b.1)));
    order.into_iter().map(|(_, p)| p).collect()
}

/// A direction in space, each equally likely.
fn direction(stream: &mut Stream) -> [f64; 3] {
    let (turn, z) = (std::f64::consts::TAU * stream.unit(), 2.0 * stream.unit() - 1.0);
    let ring = (1.0 - z * z).sqrt();
    [ring * float::cos(turn), ring * float::sin(turn), z]
}

/// The places in the order in which always one with the fewest clashes left is taken; `None` when the
/// clashes are not stored. Equal ones are drawn at random.
///
/// # Source
/// Halldórsson, M. M. & Radhakrishnan, J. (1997), Greed is good: approximating independent sets in
/// sparse and bounded-degree graphs, Algorithmica 18, 145–163.
pub fn fewest_first(conflicts: &Conflicts, stream: &mut Stream) -> Option<Vec<u32>> {
    let clashing = |place: u32| conflicts.list(place);
    let mut left: Vec<u32> =
        (0..conflicts.len as u32).map(|p| clashing(p).map(|l| l.len() as u32)).collect::<Option<_>>()?;
    let most = left.iter().copied().max().unwrap_or(0) as usize;
    let mut heaps: Vec<Vec<u32>> = vec![Vec::new(); most + 1];
    left.iter().enumerate().for_each(|(p, &n)| heaps[n as usize].push(p as u32));
    let mut open = vec![true; conflicts.len];
    let (mut taken, mut lowest) = (Vec::new(), 0);
    while lowest <= most {
        if heaps[lowest].is_empty() {
            lowest += 1;
            continue;
        }
        let drawn = stream.below(heaps[lowest].len());
        let place = heaps[lowest].swap_remove(drawn);
        if !open[place as usize] || left[place as usize] as usize != lowest {
            continue;
        }
        open[place as usize] = false;
        taken.push(place);
        for &gone in clashing(place)? {
            if std::mem::replace(&mut open[gone as usize], false) {
                for &other in clashing(gone)?.iter().filter(|&&o| open[o as usize]) {
                    left[other as usize] -= 1;
                    heaps[left[other as usize] as usize].push(other);
                    lowest = lowest.min(left[other as usize] as usize);
                }
            }
        }
    }
    Some(taken)
}
