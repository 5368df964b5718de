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
