//! From numbers to verdicts: limits, order claims, and the submission as a whole.
//!
//! Acceptance and rejection are guarded: a verdict is given only where what the file
//! can resolve does not change it (`[jcgm-106]` in [`crate::references`]).

mod ask;
mod chance;
mod claims;
#[cfg(test)]
mod planted;
mod stated;
mod words;

pub use ask::ask;
pub use claims::{Answer, Claimed, Support, of_claim};
pub use words::{family_at, family_name, reading};

use crate::compare::{Deviation, Margin, Pair, Sight};

/// How something was judged.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
#[allow(missing_docs)]
pub enum Verdict {
    Pass,
    Undecided,
    Fail,
}

impl Verdict {
    /// The word in reports.
    pub fn word(self) -> &'static str {
        match self {
            Verdict::Pass => "pass",
            Verdict::Fail => "fail",
            Verdict::Undecided => "undecided",
        }
    }

    /// The worse of two: fail before undecided before pass.
    pub fn and(self, other: Verdict) -> Verdict {
        self.max(other)
    }
}

/// What the order of one channel comes to.
#[derive(Clone, Debug, PartialEq)]
pub struct OrderVerdict {
    /// None where no order is claimed.
    pub verdict: Option<Verdict>,
    /// The finest pair of those that agree.
    pub finest: Option<Pair>,
    /// Rungs that the order rests on.
    pub rungs_used: usize,
    /// Why there is no verdict, or what to know of it.
    pub note: Option<String>,
}

/// How far the observed order may stay below the claimed one, where a submission does
/// not say (common practice, no source; compare PR06 of the published checks: 0.1 to
/// 0.3).
pub const ORDER_SLACK: f64 = 0.15;
/// An interval wider than this decides nothing where the value itself is too low.
const WIDE: f64 = 0.3;
/// A finest pair that reaches the claim is believed without a second one that agrees only
/// where the next coarser pair came this near.
const APPROACH: f64 = 0.6;
/// Pairs that stay this far below the claim do not become it.
const HOPELESS: f64 = 1.0;
/// Orders are whole numbers, or halves where a stiff case reduces them: pairs that settle closer
/// to the claim than this are on their way to it.
pub const LOWER: f64 = 0.5;

/// The verdict on a channel whose rows were all compared.
pub fn of_margin(margin: &Margin) -> Verdict {
    if margin.broken > 0.0 {
        Verdict::Fail
    } else if margin.certain <= 0.0 {
        Verdict::Pass
    } else {
        // Also where something was not a number: no comparison with it holds.
        Verdict::Undecided
    }
}

/// The verdict on a channel of a run with so many rows: one that has no value in some
/// of them fails.
pub fn of_deviation(deviation: &Deviation, rows: u64) -> Verdict {
    let complete = deviation.rows > 0 && deviation.rows >= rows;
    if complete {
        of_margin(&deviation.margin)
    } else {
        Verdict::Fail
    }
}

/// The verdict on an order; `unsettled` is why no order can be expected yet, if so: even the
/// finest step is longer than the shortest time constant, say.
pub fn of_order(
    sight: &Sight,
    claimed: Option<f64>,
    slack: f64,
    unsettled: Option<&str>,
) -> OrderVerdict {
    let mut unsettled = unsettled;
    let (pairs, agreeing, usable) = match sight {
        Sight::ExactForThisCase => {
            return OrderVerdict {
                verdict: claimed.map(|_| Verdict::Pass),
                finest: None,
                rungs_used: 0,
                note: Some("exact for this case: every error is at rounding level".to_owned()),
            };
        }
        Sight::TooFew(reason) => {
            return OrderVerdict {
                verdict: claimed.map(|_| Verdict::Undecided),
                finest: None,
                rungs_used: 0,
                note: Some(reason.clone()),
            };
        }
        Sight::Pairs {
            pairs,
            agreeing,
            usable,
            large,
        } => {
            if *large {
                unsettled = unsettled.or(Some("the errors are too large for it"));
            }
            (pairs, *agreeing, *usable)
        }
    };
    let Some(&finest) = pairs.last() else {
        let none = Sight::TooFew("no pair of runs".to_owned());
        return of_order(&none, claimed, slack, unsettled);
    };
    let list = || {
        let orders: Vec<String> = pairs
            .iter()
            .map(|pair| format!("{:.2}", pair.order))
            .collect();
        orders.join(", ")
    };
    let settled = agreeing > 1;
    let mut note = None;
    let verdict = claimed.map(|claimed| {
        let reaches = |pair: &Pair| pair.high >= claimed - slack;
        let coarser = pairs.len().checked_sub(2).map(|place| &pairs[place]);
        if reaches(&finest) {
            if coarser.is_some_and(|pair| pair.high < claimed - APPROACH) && !settled {
                note = Some(format!("neighbouring pairs do not agree: {}", list()));
                return Verdict::Undecided;
            }
            // Doubt is no merit: an interval that reaches the claim only because it is
            // wide decides nothing.
            if finest.order < claimed - slack && finest.high - finest.low > WIDE {
                note = Some("the digits leave the order open".to_owned());
                return Verdict::Undecided;
            }
            return Verdict::Pass;
        }
        // Halving the step about halves what is missing to the order: twice the last
        // rise lies ahead at most.
        let ahead = match &pairs[..] {
            [.., coarser, finer] => 2.0 * (finer.order - coarser.order).max(0.0),
            _ => 0.0,
        };
        let on_its_way = finest.high + ahead >= claimed - slack;
        let is_lower = finest.high < claimed - slack.max(LOWER);
        if settled && is_lower && !on_its_way && unsettled.is_none() {
            return Verdict::Fail;
        }
        // Errors that change their sign, or steps that are still long, give a pair any order.
        if pairs.len() == 1 {
            note = Some("one pair of runs cannot show that the order has settled".to_owned());
            return Verdict::Undecided;
        }
        // Pairs far below the claim do not become it, however little they agree.
        let hopeless = pairs.iter().all(|pair| pair.high < claimed - HOPELESS);
        // Nor do pairs that move away from it and never were there.
        let falls = pairs.len() > 2 && pairs.windows(2).all(|two| two[1].order < two[0].order);
        let leaves = falls && !pairs.iter().any(reaches);
        if (hopeless || leaves) && !on_its_way && unsettled.is_none() {
            return Verdict::Fail;
        }
        let why = unsettled.map_or(String::new(), |why| format!(": {why}"));
        note = Some(format!(
            "the order has not settled ({}){why}; add finer runs",
            list()
        ));
        Verdict::Undecided
    });
    if verdict.is_none() && !settled && pairs.len() > 1 {
        note = Some(format!("neighbouring pairs do not agree: {}", list()));
    }
    // A pair joins two rungs; those of the agreeing ones hang together.
    let rungs_used = if settled { agreeing + 1 } else { usable.min(2) };
    OrderVerdict {
        verdict,
        finest: Some(finest),
        rungs_used,
        note,
    }
}

/// The verdict on an order claim from those of the channels: one that fails decides;
/// else one that shows the order speaks for the method, even where others show nothing.
pub fn of_orders(verdicts: impl IntoIterator<Item = Verdict>) -> Option<Verdict> {
    let verdicts: Vec<Verdict> = verdicts.into_iter().collect();
    let worst = *verdicts.iter().max()?;
    let shown = verdicts.contains(&Verdict::Pass);
    Some(if worst == Verdict::Undecided && shown {
        Verdict::Pass
    } else {
        worst
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    fn margin(certain: f64, broken: f64) -> Margin {
        Margin {
            certain,
            broken,
            used: 0.0,
        }
    }

    #[test]
    fn acceptance_and_rejection_are_guarded() {
        assert_eq!(of_margin(&margin(0.0, -1.0)), Verdict::Pass);
        assert_eq!(of_margin(&margin(1e-9, -1.0)), Verdict::Undecided);
        assert_eq!(of_margin(&margin(1e-9, 0.0)), Verdict::Undecided);
        assert_eq!(of_margin(&margin(1.0, 1e-9)), Verdict::Fail);
        assert_eq!(of_margin(&margin(f64::NAN, f64::NAN)), Verdict::Undecided);
    }

    fn order(orders: &[f64], claimed: f64) -> Verdict {
        let pair = |&order: &f64| Pair {
            settings: (2.0, 1.0),
            order,
            low: order - 0.01,
            high: order + 0.01,
        };
        let pairs: Vec<Pair> = orders.iter().map(pair).collect();
        let close = |two: &&[f64]| (two[1] - two[0]).abs() <= 0.15;
        let agreeing = 1 + orders.windows(2).rev().take_while(close).count();
        let usable = pairs.len() + 1;
        let sight = Sight::Pairs {
            pairs,
            agreeing,
            usable,
            large: false,
        };
        of_order(&sight, Some(claimed), ORDER_SLACK, None)
            .verdict
            .unwrap()
    }

    #[test]
    fn orders_pass_fail_or_stay_open() {
        assert_eq!(order(&[0.86, 0.92, 0.96, 0.98], 1.0), Verdict::Pass);
        assert_eq!(order(&[3.5, 3.9], 4.0), Verdict::Pass);
        assert_eq!(order(&[0.97, 0.99, 1.0], 2.0), Verdict::Fail);
        // Rising towards the claim, but not there.
        assert_eq!(order(&[0.4, 0.58, 0.75], 1.0), Verdict::Undecided);
        assert_eq!(order(&[0.72, 0.83], 1.0), Verdict::Undecided);
        assert_eq!(order(&[0.35, 1.88, 1.68, 1.49], 2.0), Verdict::Undecided);
        // All over the place and never near it.
        assert_eq!(order(&[0.3, 1.4, 0.8], 4.0), Verdict::Fail);
        assert_eq!(order(&[0.3, 2.1], 2.0), Verdict::Undecided);
        assert_eq!(order(&[1.0, 1.0, 1.0, 1.9], 2.0), Verdict::Undecided);
        // A single pair fails nothing.
        assert_eq!(order(&[1.0], 2.0), Verdict::Undecided);
        assert_eq!(order(&[1.7], 2.0), Verdict::Undecided);
        assert_eq!(order(&[1.9], 2.0), Verdict::Pass);
        assert_eq!(order(&[5.0, 5.1], 4.0), Verdict::Pass);
    }

    #[test]
    fn orders_that_nothing_decides_say_why() {
        let pair = Pair::around;
        let judge = |pairs: Vec<Pair>, agreeing: usize, large: bool, why: Option<&str>| {
            let usable = pairs.len() + 1;
            let sight = Sight::Pairs {
                pairs,
                agreeing,
                usable,
                large,
            };
            let found = of_order(&sight, Some(2.0), ORDER_SLACK, why);
            (found.verdict.unwrap(), found.rungs_used, found.note)
        };
        let settled = || vec![pair(1.0, 0.01), pair(1.0, 0.01), pair(1.0, 0.01)];
        assert_eq!(judge(settled(), 3, false, None), (Verdict::Fail, 4, None));
        let text = |why: &str| {
            Some(format!(
                "the order has not settled (1.00, 1.00, 1.00): {why}; add finer runs"
            ))
        };
        let large = text("the errors are too large for it");
        assert_eq!(
            judge(settled(), 3, true, None),
            (Verdict::Undecided, 4, large)
        );
        let found = judge(settled(), 3, true, Some("the steps are too long"));
        assert_eq!(
            found,
            (Verdict::Undecided, 4, text("the steps are too long"))
        );
        // Doubt is no merit: as wide as 0.3 it may reach the claim, wider it decides nothing.
        let single = |order: f64, half: f64| judge(vec![pair(order, half)], 1, false, None);
        assert_eq!(single(1.8, 0.149).0, Verdict::Pass);
        let open = Some("the digits leave the order open".to_owned());
        assert_eq!(single(1.8, 0.151), (Verdict::Undecided, 2, open));
        assert_eq!(single(1.9, 2.0).0, Verdict::Pass);
        // One pair below the claim never fails it, however far below.
        let alone = Some("one pair of runs cannot show that the order has settled".to_owned());
        assert_eq!(single(-0.1, 0.01), (Verdict::Undecided, 2, alone));
        // Pairs that agree do, from half an order below it on.
        let alike = |order: f64| judge(vec![pair(order, 0.01); 2], 2, false, None).0;
        assert_eq!(alike(1.48), Verdict::Fail);
        assert_eq!(alike(1.51), Verdict::Undecided);
        // A finest pair alone is believed where the one before came near.
        let two = |coarse: f64| judge(vec![pair(coarse, 0.0), pair(2.0, 0.0)], 1, false, None);
        assert_eq!(two(1.41).0, Verdict::Pass);
        let list = Some("neighbouring pairs do not agree: 1.39, 2.00".to_owned());
        assert_eq!(two(1.39), (Verdict::Undecided, 2, list));
    }

    #[test]
    fn words_of_verdicts() {
        let words = [Verdict::Pass, Verdict::Undecided, Verdict::Fail].map(Verdict::word);
        assert_eq!(words, ["pass", "undecided", "fail"]);
        let words = [Support::Agrees, Support::CannotTell, Support::Contradicts].map(Support::word);
        assert_eq!(words, ["agrees", "cannot tell", "contradicts"]);
    }

    #[test]
    fn pairs_that_fall_away_from_the_claim_fail_it() {
        // Never near it, and falling from pair to pair: unsettled, not on their way.
        assert_eq!(order(&[1.7, 1.5, 1.3], 2.0), Verdict::Fail);
        assert_eq!(order(&[1.7, 1.3], 2.0), Verdict::Undecided);
        assert_eq!(order(&[1.5, 1.7, 1.3], 2.0), Verdict::Undecided);
        assert_eq!(order(&[1.7, 1.3, 1.3], 2.0), Verdict::Fail);
        assert_eq!(order(&[1.9, 1.5, 1.3], 2.0), Verdict::Undecided);
        // All pairs lie more than one below the claim.
        assert_eq!(order(&[0.5, 0.9, 0.6], 2.0), Verdict::Fail);
        assert_eq!(order(&[0.5, 1.1, 0.6], 2.0), Verdict::Undecided);
        let unsettled = |orders: &[f64]| {
            let pair = |&order: &f64| Pair {
                settings: (2.0, 1.0),
                order,
                low: order,
                high: order,
            };
            let pairs: Vec<Pair> = orders.iter().map(pair).collect();
            let sight = Sight::Pairs {
                agreeing: 1,
                usable: 4,
                large: false,
                pairs,
            };
            of_order(&sight, Some(2.0), ORDER_SLACK, Some("too long"))
                .verdict
                .unwrap()
        };
        assert_eq!(unsettled(&[1.7, 1.5, 1.3]), Verdict::Undecided);
        assert_eq!(unsettled(&[0.5, 0.9, 0.6]), Verdict::Undecided);
        assert_eq!(unsettled(&[0.5]), Verdict::Undecided);
    }

    #[test]
    fn rungs_that_show_no_order_are_told_in_words() {
        let few = Sight::TooFew("so few".to_owned());
        let found = of_order(&few, Some(2.0), ORDER_SLACK, None);
        assert_eq!(
            (found.verdict, found.note),
            (Some(Verdict::Undecided), Some("so few".to_owned()))
        );
        assert_eq!(of_order(&few, None, ORDER_SLACK, None).verdict, None);
        let exact = of_order(&Sight::ExactForThisCase, Some(2.0), ORDER_SLACK, None);
        assert_eq!((exact.verdict, exact.rungs_used), (Some(Verdict::Pass), 0));
        // Without a claim what does not agree is still told.
        let pair = |order: f64| Pair::around(order, 0.0);
        let sight = |agreeing: usize| Sight::Pairs {
            pairs: vec![pair(1.0), pair(2.0)],
            agreeing,
            usable: 3,
            large: false,
        };
        let found = of_order(&sight(1), None, ORDER_SLACK, None);
        assert_eq!(
            found.note.unwrap(),
            "neighbouring pairs do not agree: 1.00, 2.00"
        );
        assert_eq!(of_order(&sight(2), None, ORDER_SLACK, None).note, None);
    }

    #[test]
    fn a_channel_without_a_value_in_some_row_fails() {
        let spot = crate::compare::Spot {
            at: 0.0,
            error: 0.0,
            resolution: 0.0,
            limit: 1.0,
        };
        let deviation = |rows: u64, margin: Margin| Deviation {
            rows,
            worst: 0.0,
            worst_at: 0.0,
            worst_resolution: 0.0,
            worst_limit: 1.0,
            rms: 0.0,
            end: 0.0,
            peak: 1.0,
            steepest: 0.0,
            resolution: crate::trajectory::Resolution::Full,
            margin,
            decisive: spot,
            doubtful: spot,
        };
        let kept = margin(-1.0, -1.0);
        assert_eq!(of_deviation(&deviation(5, kept), 5), Verdict::Pass);
        assert_eq!(of_deviation(&deviation(4, kept), 5), Verdict::Fail);
        assert_eq!(of_deviation(&deviation(0, kept), 0), Verdict::Fail);
        let open = of_deviation(&deviation(5, margin(1.0, -1.0)), 5);
        assert_eq!(open, Verdict::Undecided);
    }

    #[test]
    fn channels_speak_for_the_method_together() {
        use Verdict::{Fail, Pass, Undecided};
        assert_eq!(of_orders([Pass, Undecided]), Some(Pass));
        assert_eq!(of_orders([Undecided]), Some(Undecided));
        assert_eq!(of_orders([Pass, Fail]), Some(Fail));
        assert_eq!(of_orders([]), None);
    }
}
