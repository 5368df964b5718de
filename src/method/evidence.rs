//! Which methods of the catalogue, at which steps, could have written a file.
//!
//! Every method is tried at the steps that its own error points to: on a linear model the
//! error that a method would have made falls with its step, so the error in the file says
//! how many internal steps lie between two rows, if that method wrote them. What is left is
//! the set of consistent pairs, methods that these rows cannot tell apart under one name.

mod families;

use rayon::prelude::*;

use super::catalogue::{METHODS, Method};
use super::crossing::kicked;
use super::estimate::Targets;
use super::exactly::exact_fit;
use super::iterated::Form;
use super::linear::Linear;
use super::ranks::rank_orders;
use super::record::{Piece, Record};
use super::recurrence::Reading;
use super::search::{Found, Search};
use super::sheet::Sheet;
use super::trial::Fit;
use families::{alike, families};

/// One method at one step, compared with the rows.
#[derive(Clone, Debug)]
pub struct Tried {
    /// The method.
    pub method: &'static Method,
    /// How the inputs were read.
    pub reading: Reading,
    /// Steps from row to row; zero where every spacing of the rows was one or two steps.
    pub steps: u64,
    /// Where more numbers of steps agree: the least and the most of them.
    pub range: (u64, u64),
    /// The step; `None` where it follows the rows.
    pub step: Option<f64>,
    /// How well it agrees.
    pub fit: Fit,
    /// How well the exact solution would agree in place of the rows, as a ratio likewise:
    /// up to one, this pair cannot be told from it. Not a number where the pair does not
    /// agree itself.
    pub apart: f64,
    /// How well it agrees with the steps at jumps of an input, whichever side it sees;
    /// nothing is compared where the pair does not agree between them.
    pub at_jumps: Fit,
    /// True where the method's hidden start was free to choose.
    pub free: bool,
    /// What tells it apart from other methods on these rows.
    pub(super) print: Vec<f64>,
    /// How far the print itself is rounded, in terms of its largest entry: fast modes over a
    /// long step leave differences of large numbers.
    pub coarse: f64,
}

/// One method at one step that the rows are too few for.
#[derive(Clone, Debug)]
pub struct Skipped {
    /// The method.
    pub method: &'static Method,
    /// Steps from row to row.
    pub steps: u64,
    /// Nothing compared, or so few rows more than hidden states that some start meets them.
    pub fit: Fit,
}

/// Methods that these rows cannot tell apart, at one step.
#[derive(Clone, Debug)]
pub struct Family {
    /// In the order of the catalogue.
    pub methods: Vec<&'static Method>,
    /// How the inputs were read.
    pub reading: Reading,
    /// Steps from row to row.
    pub steps: u64,
    /// Where more numbers of steps agree: the least and the most of them.
    pub range: (u64, u64),
    /// The step; `None` where it follows the rows.
    pub step: Option<f64>,
    /// The better of the fits.
    pub fit: Fit,
    /// How far the exact solution is from it, see [`Tried::apart`], at jumps as well.
    pub apart: f64,
    /// How well it agrees with the steps at jumps of an input, see [`Tried::at_jumps`].
    pub at_jumps: Fit,
    /// True where the method's hidden start was free to choose.
    pub free: bool,
}

/// What the rows of one file say of all methods.
#[derive(Clone, Debug)]
pub struct Evidence {
    /// Every pair that was compared.
    pub tried: Vec<Tried>,
    /// Those that nothing speaks against.
    pub consistent: Vec<Family>,
    /// The exact solution itself.
    pub exact: Fit,
    /// True where what has gone astray since a jump or since the start is within digits and
    /// roundings: between jumps no method can be told from the exact solution.
    pub exact_between_jumps: bool,
    /// True where inputs jump or have a kink between the rows that are compared, and every
    /// state is there.
    pub jumps: bool,
    /// What the rows are too few for.
    pub skipped: Vec<Skipped>,
}

/// Fewer comparisons may be met by chance.
const MANY_COMPARED: usize = 16;
/// So many times closer to the rows than the exact solution comes nothing by chance.
const SHARP: f64 = 1e6;
/// A residual below this part of what is allowed says no more than one at it.
const LEAST_RATIO: f64 = 1e-3;
/// Pieces that are compared at most, the first one among them.
const MOST_PIECES: usize = 16;
/// Entries of the matrices of two methods that differ by less than this part of the largest one are
/// the same: a stiff step cancels.
const SAME_COMPUTED: f64 = 1e-12;

/// Residuals so many times those of another pair are no roundings of the pair's own: the
/// other one has them in the way, too.
const OUTDONE: f64 = 12.0;
/// A pair is told from the exact solution where that is so many times further from the rows
/// than digits and rounding allow.
const TOLD: f64 = 3.0;

/// Without a start of its own choosing, a pair that comes so many times closer to the rows
/// than the exact solution explains them, however wide its bound is.
const CLOSER: f64 = 100.0;

fn told(apart: f64, free: bool) -> bool {
    apart > if free { OUTDONE } else { TOLD }
}

impl Tried {
    /// See [`Family::is_told`].
    pub fn is_told(&self) -> bool {
        told(self.apart, self.free)
    }

    /// How many times closer than another consistent pair this one comes to the rows, in
    /// terms of what the steps of that pair round in any case.
    ///
    /// What digits and rounding allow is a bound, for some methods a wide one. The roundings
    /// that a pair really made stand in the residuals of every other pair as well, which
    /// cannot come much closer to the rows than they are large.
    pub fn outdoes(&self, other: &Tried, unit: f64) -> f64 {
        // Methods of one effect differ by how they are computed here.
        if self.steps == other.steps
            && alike(
                &self.print,
                &other.print,
                SAME_COMPUTED.max(self.coarse).max(other.coarse),
            )
        {
            return 0.0;
        }
        let steps = other.steps.max(self.steps) as f64;
        // A start that is free to choose follows what drifts, else the roundings of many
        // steps are scattered.
        let steps = if self.free { steps } else { steps.sqrt() };
        let rounded = 4.0 * unit * steps;
        let closer = !self.free && self.apart > CLOSER * self.fit.ratio;
        // From row to row, unless one of them runs on from its start.
        let of = |fit: &Fit| {
            if self.free || other.free {
                fit.astray
            } else {
                fit.residual
            }
        };
        if self.apart > 1.0 || closer {
            (of(&other.fit) - other.fit.blur) / of(&self.fit).max(rounded)
        } else {
            0.0
        }
    }
}

impl Family {
    /// More steps from row to row than this come near to the exact solution in most methods.
    pub const MANY_STEPS: u64 = 64;

    /// True where the exact solution is clearly further from the rows; a start that is free
    /// to choose has to do more than that.
    pub fn is_told(&self) -> bool {
        told(self.apart, self.free)
    }

    /// True where it comes so much closer to the rows than the exact solution that no method
    /// outside the catalogue would meet them by chance.
    pub fn is_beyond_chance(&self) -> bool {
        self.reading == Reading::AtNodes
            && self.steps <= Family::MANY_STEPS
            && self.is_compared_well()
            && self.apart > 1.0
            && self.apart > SHARP * self.fit.ratio.max(LEAST_RATIO)
    }

    /// True over more comparisons than a few.
    pub fn is_compared_well(&self) -> bool {
        self.fit.compared >= MANY_COMPARED
    }
}

impl Evidence {
    /// True where the rows are no further from the exact solution than digits and rounding
    /// allow.
    pub fn is_exact(&self) -> bool {
        self.exact.holds()
    }

    /// True where anything could be compared.
    pub fn is_any(&self) -> bool {
        self.tried.iter().any(|tried| tried.fit.compared > 0)
    }

    /// True where one of the methods, in any of its forms, could not be compared at so many
    /// steps from row to row.
    pub fn is_skipped(&self, methods: &[&Method], steps: Option<u64>) -> bool {
        self.skipped.iter().any(|skipped| {
            methods.iter().any(|m| m.name == skipped.method.name)
                && steps.is_none_or(|steps| steps == skipped.steps)
        })
    }

    /// How many times closer to the rows than a consistent pair something else comes, see [`Tried::outdoes`]; with what that is.
    pub fn outdone(&self, own: &Tried, claimed: &[&Method], unit: f64) -> Option<(f64, &Family)> {
        // Some other form of the method, or another one of its name, may be the one.
        let same = |f: &&Family| f.steps == own.steps && is_any(&f.methods, claimed);
        let families = self.consistent.iter();
        let well = |f: &&Family| !f.free || f.is_compared_well();
        let plain = families
            .filter(|f| f.reading == Reading::AtNodes)
            .filter(well);
        let plain = plain.filter(|f| !same(f));
        let pairs = plain.filter_map(|family| {
            let name = family.methods.first()?.name;
            let mut tried = self.tried.iter();
            let other = tried.find(|t| t.method.name == name && t.steps == family.steps)?;
            Some((other.outdoes(own, unit), family))
        });
        pairs.max_by(|a, b| a.0.total_cmp(&b.0))
    }

    /// The consistent families that can be told from the exact solution: only these say
    /// what wrote the rows.
    pub fn told(&self) -> impl Iterator<Item = &Family> {
        self.consistent.iter().filter(|family| family.is_told())
    }

    /// True where a pair that agrees was left out of the consistent ones: something else
    /// explains the rows better.
    pub fn is_left_out(&self, own: &Tried, claimed: &[&Method]) -> bool {
        let own = |f: &Family| f.steps == own.steps && is_any(&f.methods, claimed);
        !self.consistent.iter().any(own)
    }

    /// True where any form of the claimed methods agrees with the steps at jumps.
    pub fn any_at_jumps(&self, own: &Tried, claimed: &[&Method]) -> bool {
        let same = |t: &Tried| is_any(&[t.method], claimed) && t.steps == own.steps;
        self.tried.iter().any(|t| same(t) && t.at_jumps.holds())
    }

    /// What agrees with the steps at jumps of an input where a pair that agrees between them
    /// does not.
    pub fn better_at_jumps(&self, own: &Tried, claimed: &[&Method]) -> Option<&Family> {
        let any = self.any_at_jumps(own, claimed);
        let mut families = self.consistent.iter();
        families.find(|family| !any && own.at_jumps.ratio > 1.0 && family.at_jumps.holds())
    }

    /// The best fit of one method at any step.
    pub fn best_of(&self, name: &str) -> Option<&Tried> {
        let own = self.tried.iter().filter(|tried| tried.method.name == name);
        own.min_by(|a, b| a.fit.ratio.total_cmp(&b.fit.ratio))
    }

    /// The best fit of a set of methods at so many steps from row to row; at any number of
    /// them where none is given.
    pub fn best(&self, methods: &[&Method], steps: Option<u64>) -> Option<&Tried> {
        let wanted = self.tried.iter().filter(|tried| {
            tried.fit.compared > 0
                && methods.iter().any(|m| m.name == tried.method.name)
                && steps.is_none_or(|steps| {
                    tried.steps == steps
                        || tried.fit.holds() && (tried.range.0..=tried.range.1).contains(&steps)
                })
        });
        // Of methods of one name, one that meets the jumps as well.
        let rank = |tried: &Tried| match tried.fit.holds() {
            true => u8::from(tried.at_jumps.ratio > 1.0),
            false => 2,
        };
        wanted.min_by(|a, b| {
            let ranks = rank(a).cmp(&rank(b));
            ranks.then(a.fit.ratio.total_cmp(&b.fit.ratio))
        })
    }
}

fn is_any(methods: &[&'static Method], claimed: &[&Method]) -> bool {
    let mut methods = methods.iter();
    methods.any(|m| claimed.iter().any(|c| c.name == m.name))
}

/// Compares the rows with every method. `claimed` are the methods and the numbers of steps
/// from row to row that are tried in any case.
///
/// # Cost
/// Bounded by the windows of the record, see [`super::windows`].
pub fn evidence(
    linear: &Linear,
    record: &Record,
    claimed: &[&'static Method],
    claimed_steps: &[u64],
) -> Evidence {
    let search = search(linear, record, claimed, claimed_steps);
    let exact = search.exact;
    let all: Vec<&'static Method> = METHODS.iter().collect();
    let with = |reading: Reading| each(&all, |method| search.method(method, reading));
    let mut found = with(Reading::AtNodes);
    let told = |tried: &Tried| tried.fit.holds() && tried.apart > 1.0;
    if claimed_steps.is_empty() && !found.tried.iter().any(told) && !exact.holds() {
        let wanted = if claimed.is_empty() { &all } else { claimed };
        found.add(each(wanted, |method| search.sweep(method)));
    }
    // Other ways to read the inputs are looked at where the plain one explains nothing, or
    // not the claim.
    let explained = |found: &Found| {
        let holds = |tried: &Tried| {
            let wanted = claimed.is_empty() || is_any(&[tried.method], claimed);
            let step = claimed_steps.is_empty() || claimed_steps.contains(&tried.steps);
            tried.fit.holds() && wanted && step
        };
        found.tried.iter().any(holds)
    };
    if !linear.is_steady() && !explained(&found) && !exact.holds() {
        for reading in [
            Reading::Held,
            Reading::FromEnd,
            Reading::Mean,
            Reading::Linear,
        ] {
            found.add(with(reading));
        }
    }
    // A program whose time misses the jumps by roundings sees now one side, now the other.
    let (from, to) = linear.window;
    let jumps = !search.complete && linear.jumps_within(from, to);
    if jumps && !explained(&found) && (!exact.holds() || !claimed.is_empty()) {
        found.add(with(Reading::EitherSide));
    }
    conclude(&search, found)
}

/// The same for the claimed methods alone, with inputs read as usual: what else there may be
/// is known or does not matter.
pub fn evidence_of(
    linear: &Linear,
    record: &Record,
    claimed: &[&'static Method],
    claimed_steps: &[u64],
) -> Evidence {
    let search = search(linear, record, claimed, claimed_steps);
    let found = each(claimed, |method| search.method(method, Reading::AtNodes));
    conclude(&search, found)
}

/// The first of some forms of a method that fits the rows at so many steps from row to row;
/// where `few` allows it, or that the rows are too few for.
pub fn fitting<'a>(
    linear: &Linear,
    record: &Record,
    method: &'static Method,
    forms: &'a [Form],
    steps: u64,
    few: bool,
) -> Option<&'a Form> {
    let (claimed, claimed_steps) = ([method], [steps]);
    let search = search(linear, record, &claimed, &claimed_steps);
    let fits = |form: &&Form| {
        let found = search.form(method, (None, &form.coefficients), Reading::AtNodes);
        let mut tried = found.tried.iter().filter(|tried| tried.steps == steps);
        tried.any(|tried| tried.fit.holds())
            || (few && found.skipped.iter().any(|s| s.steps == steps))
    };
    forms.par_iter().find_first(fits)
}

fn search<'a>(
    linear: &'a Linear,
    record: &Record,
    claimed: &'a [&'static Method],
    claimed_steps: &'a [u64],
) -> Search<'a> {
    let mut pieces = record.pieces(linear);
    thin(&mut pieces);
    Search {
        linear,
        sheet: Sheet::new(linear, record.clone(), &pieces),
        solution: Sheet::new(linear, record.solution(), &pieces),
        complete: record.states(linear.size()).is_some(),
        targets: Targets::new(linear, record, &pieces),
        pieces,
        orders: rank_orders(linear),
        reference: METHODS.iter().find(|method| method.name == "Gauss 6"),
        exact: exact_fit(record),
        claimed,
        claimed_steps,
    }
}

/// Does work for each method on all processors; the order stays that of the methods.
fn each(methods: &[&'static Method], work: impl Fn(&'static Method) -> Found + Sync) -> Found {
    let found: Vec<Found> = methods.par_iter().map(|method| work(method)).collect();
    let mut all = Found::default();
    found.into_iter().for_each(|one| all.add(one));
    all
}

fn conclude(search: &Search, found: Found) -> Evidence {
    let record = &search.sheet.record;
    let kicked = kicked(search.linear, record);
    Evidence {
        consistent: families(&found.tried, record.unit, kicked),
        tried: found.tried,
        exact_between_jumps: search.targets.clearness() <= 1.0,
        jumps: search.complete && search.jumps_within_rows(),
        skipped: found.skipped,
        exact: search.exact,
    }
}

/// Keeps the first piece and others spread over the file.
fn thin(pieces: &mut Vec<Piece>) {
    if pieces.len() <= MOST_PIECES {
        return;
    }
    let count = pieces.len();
    let mut kept: Vec<Piece> = (0..MOST_PIECES)
        .map(|k| pieces[k * (count - 1) / (MOST_PIECES - 1)])
        .collect();
    kept.dedup();
    *pieces = kept;
}

#[cfg(test)]
mod tests;
