//! Which nodes of a long run are compared with the exact solution.

use super::run::Grid;
use crate::exact::Exact;
use crate::method::NEAR;
use crate::number::Double;

/// Walks over the exact solution: two along combs of nodes, which are quick because
/// their teeth are evenly spaced, and one for the other nodes.
pub(super) const WALKS: usize = 3;

/// The nodes that are compared, in order, each with the walk that serves it: all of them
/// where there are fewer than `most`, else about as many.
pub(super) fn compared(exact: &Exact, grid: Grid, first: u64, most: u64) -> Vec<(u64, usize)> {
    let Grid { step, count } = grid;
    if count - first < most {
        return (first..=count).map(|node| (node, 0)).collect();
    }
    // Most of them spread over the window. One comb could meet an oscillation at the same
    // phase always; a second one that is shifted by the golden section then does not.
    let teeth = 3 * most / 8;
    let stride = (count - first).div_ceil(teeth);
    let shift = (0.618 * stride as f64) as u64;
    let comb = |walk: usize, from: u64| {
        let nodes = (from..=count).step_by(stride as usize);
        nodes.map(move |node| (node, walk))
    };
    let mut nodes: Vec<(u64, usize)> = comb(0, first).chain(comb(1, first + shift)).collect();
    // The rest where fast modes live: close after the start and after jumps.
    let places: Vec<f64> = std::iter::once(exact.from().to_f64())
        .chain(exact.jumps())
        .map(|time| ((Double::from(time) - exact.from()) / step).to_f64())
        .collect();
    let budget = (most - 2 * teeth) as usize;
    let thinned = places.len().div_ceil(budget / 4);
    let each = budget / places.len().div_ceil(thinned);
    let farther = |&distance: &u64| Some((distance + 1).max(distance + distance / 7));
    let distances = std::iter::successors(Some(0), farther);
    let distances: Vec<u64> = distances
        .take_while(|&distance| distance <= count)
        .take(each)
        .collect();
    for place in places.iter().step_by(thinned) {
        let base = (place + NEAR).floor() as u64;
        nodes.extend(distances.iter().map(|distance| (base + distance, 2)));
    }
    nodes.push((count, 2));
    nodes.retain(|(node, _)| (first..=count).contains(node));
    nodes.sort_unstable();
    nodes.dedup_by_key(|(node, _)| *node);
    nodes
}

#[cfg(test)]
mod tests {
    use super::super::run::{MOST_COMPARED, Question};
    use super::*;
    use crate::case::{Library, Replacements};

    #[test]
    fn nodes_compared_are_all_or_include_the_telling_ones() {
        let case = Library::new().load("electrical/rc-pulse", &Replacements::new());
        let case = case.unwrap();
        let exact = case.exact().unwrap();
        let question = Question::new(&case, &exact, &[]);
        let few = compared(&exact, question.divided(100), 2, MOST_COMPARED);
        assert_eq!(few, (2..=100).map(|node| (node, 0)).collect::<Vec<_>>());
        let many = compared(&exact, question.divided(120_000), 1, MOST_COMPARED);
        let many: Vec<u64> = many.into_iter().map(|(node, _)| node).collect();
        assert!(many.len() as u64 <= MOST_COMPARED + 1 && many.len() > 2000);
        // Jumps at 1 and 3 of 12.
        for node in [1, 2, 3, 10_000, 10_001, 30_000, 30_001, 120_000] {
            assert!(many.contains(&node), "{node}");
        }
        assert!(many.windows(2).all(|pair| pair[0] < pair[1]));
        // No stretch of the window is passed over.
        assert!(many.windows(2).all(|pair| pair[1] - pair[0] < 120));
    }
}
