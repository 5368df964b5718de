//! The orders in which a semi-implicit step may move the states.

use super::linear::Linear;
use super::recurrence::Ranks;

/// A semi-implicit step of so many states is tried in every order of them.
const MOST_ORDERED: usize = 4;

/// The orders in which a semi-implicit step may move the states: positions after the rates
/// that they follow or before them where there are such, else one by one, in any order
/// where there are few.
pub fn rank_orders(linear: &Linear) -> Vec<Ranks> {
    let size = linear.size();
    let is_position = |i: usize| {
        let row = linear.matrix.row(i);
        let others = row.iter().enumerate().filter(|(_, x)| **x != 0.0);
        let others: Vec<usize> = others.map(|(j, _)| j).collect();
        others.len() == 1
            && others[0] != i
            && linear.constant[i] == 0.0
            && linear.drive[i].iter().all(|d| *d == 0.0)
    };
    let positions: Vec<bool> = (0..size).map(is_position).collect();
    let mut orders: Vec<Ranks> = Vec::new();
    if positions.contains(&true) && positions.contains(&false) {
        orders.push(positions.iter().map(|p| usize::from(*p)).collect());
        orders.push(positions.iter().map(|p| usize::from(!*p)).collect());
    }
    if size <= MOST_ORDERED {
        orders.extend(permutations(size));
    } else {
        orders.push((0..size).collect());
        orders.push((0..size).rev().collect());
    }
    orders.dedup();
    orders
}

/// Every order of so many states.
fn permutations(size: usize) -> Vec<Ranks> {
    let Some(last) = size.checked_sub(1) else {
        return vec![Ranks::new()];
    };
    let shorter = permutations(last);
    let with_last = |order: Ranks| {
        (0..size).rev().map(move |place| {
            let mut order = order.clone();
            order.insert(place, last);
            order
        })
    };
    shorter.into_iter().flat_map(with_last).collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::case::{Case, Replacements};

    fn orders(rates: &[&str]) -> Vec<Ranks> {
        let state = |(i, rate): (usize, &&str)| {
            format!("[[states]]\nname = 's{i}'\nunit = 'm'\nstart = 0\nrate = '{rate}'\n")
        };
        let states: String = rates.iter().enumerate().map(state).collect();
        let text = format!(
            "title = 'trial'\nfield = 'trial'\nabout = ''\nsource = 'ours'\nhard_for = []\n\
             [time]\nunit = 's'\nfrom = 0\nto = 10\n{states}\
             [[inputs]]\nname = 'u'\nunit = 'm'\nshape = 'constant'\nvalue = 1\n\
             [limits]\nabsolute = 1\nrelative = 0\n"
        );
        rank_orders(&Linear::new(
            &Case::parse("trial", &text, &Replacements::new()).unwrap(),
        ))
    }

    #[test]
    fn positions_are_moved_after_the_rates_or_before_them() {
        let one_by_one = [vec![0, 1, 2, 3, 4, 5], vec![5, 4, 3, 2, 1, 0]];
        // Three positions, each the integral of one rate.
        let chain = ["s1", "-s0 - s1", "2*s3", "-s2 + s4 + u", "s5", "-s4 - s5"];
        let mut wanted = vec![vec![1, 0, 1, 0, 1, 0], vec![0, 1, 0, 1, 0, 1]];
        wanted.extend(one_by_one.clone());
        assert_eq!(orders(&chain), wanted);
        // None that is driven, moved by a constant, by itself or by two.
        let others = ["s1 + u", "-s0 - s1", "s3 + 1", "-s2 - s3", "-s4", "s4 + s3"];
        assert_eq!(orders(&others), one_by_one);
    }

    #[test]
    fn few_states_are_tried_in_every_order() {
        let mut found = orders(&["-s0 + s1 + u", "-s1 + s2", "-s2 + u"]);
        found.sort();
        let wanted = [
            [0, 1, 2],
            [0, 2, 1],
            [1, 0, 2],
            [1, 2, 0],
            [2, 0, 1],
            [2, 1, 0],
        ];
        assert_eq!(found, wanted);
    }
}
