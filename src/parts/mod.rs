//! One audit on many machines: a plan to the share of one of them, and the reports of all
//! parts back to the report of the whole.
//!
//! `whole` says what is divided, so that parts of different audits are told apart; `join`
//! puts reports together. A division depends on the submissions and the sizes of their files
//! alone, so that every machine comes to the same one without asking the others.

mod join;
mod whole;

use std::cmp::Reverse;
use std::collections::BinaryHeap;

use crate::audit::Plan;
use crate::outcome::Part;

pub use join::{Given, Joined, join};
pub use whole::{Asked, cases, digest, terms, whole};

/// Most parts that an audit is divided into.
pub const MOST_PARTS: u32 = 10_000;

/// Leaves one part of a plan, from one up to `of`.
pub fn divide(plan: &mut Plan, number: u32, of: u32, asked: &Asked) {
    let (whole, sizes) = whole(plan, asked);
    // Submissions that cannot be read are all complaint and no work.
    let weights: Vec<u64> = std::iter::repeat_n(0, plan.unreadable.len())
        .chain(sizes)
        .collect();
    let shares = shares(&weights, of);
    let (unread, read) = shares.split_at(plan.unreadable.len());
    let here = |share: &u32| *share + 1 == number;
    let places = |shares: &[u32], first: usize| {
        let numbered = shares.iter().enumerate();
        let own = numbered.filter(|(_, share)| here(share));
        own.map(|(index, _)| (first + index) as u64).collect()
    };
    plan.part = Some(Part {
        number,
        of,
        whole,
        places: places(read, unread.len()),
        places_not_audited: places(unread, 0),
    });
    keep(&mut plan.unreadable, unread, here);
    keep(&mut plan.submissions, read, here);
}

fn keep<T>(list: &mut Vec<T>, shares: &[u32], here: impl Fn(&u32) -> bool) {
    let mut shares = shares.iter();
    list.retain(|_| shares.next().is_some_and(&here));
}

/// The share of each submission, from zero: the largest first, each to the share with the
/// least to do, then to the one with the fewest.
fn shares(weights: &[u64], of: u32) -> Vec<u32> {
    let mut order: Vec<usize> = (0..weights.len()).collect();
    order.sort_by_key(|&index| (Reverse(weights[index]), index));
    let free = (0..of).map(|share| Reverse((0_u64, 0_u64, share)));
    let mut free: BinaryHeap<_> = free.collect();
    let mut shares = vec![0; weights.len()];
    for index in order {
        let Some(Reverse((load, count, share))) = free.pop() else {
            break;
        };
        shares[index] = share;
        let load = load.saturating_add(weights[index]);
        free.push(Reverse((load, count + 1, share)));
    }
    shares
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_largest_go_first_and_nothing_is_left_over() {
        // Nine on either side: the last goes to the one with fewer.
        assert_eq!(shares(&[1, 9, 4, 5], 2), [0, 0, 1, 1]);
        assert_eq!(shares(&[0, 0, 0], 2), [0, 1, 0]);
        assert_eq!(shares(&[3], 4), [0]);
        assert_eq!(shares(&[], 3), [0; 0]);
        // Sizes that do not fit a sum are no reason to stop.
        assert_eq!(shares(&[u64::MAX, u64::MAX, 1], 1), [0; 3]);
    }

    #[test]
    fn no_share_is_far_above_the_others() {
        let weights: Vec<u64> = (0..500).map(|k| (k * 7919 + 13) % 1000).collect();
        for of in [1, 2, 7, 60] {
            let mut loads = vec![0; of as usize];
            for (share, weight) in shares(&weights, of).iter().zip(&weights) {
                loads[*share as usize] += weight;
            }
            let (least, most) = (loads.iter().min().unwrap(), loads.iter().max().unwrap());
            assert!(most - least <= 999, "{of}: {least} to {most}");
        }
    }
}
