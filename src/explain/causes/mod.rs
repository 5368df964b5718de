//! Likely causes of a failing run. Each hypothesis is computed: a fault is put into the
//! model, into a method's work on it, or into what was written, and the result is laid
//! beside the file. A cause is named where nothing is left but digits and rounding; where no
//! method of the catalogue is known to have been at work, where no more is left than the
//! method would leave and the fault stands far out of it. Of several the simplest is named,
//! and all that are equally simple.

mod bench;
mod faults;
mod jumps;
mod kind;
mod method;
mod model;
mod rates;
mod shape;
mod written;

use rayon::prelude::*;

use bench::{Gap, Rows, Stepping, Way, trajectory};
pub use kind::Kind;
pub use rates::Parameters;

use crate::judge::{Answer, Support, family_at};
use crate::method::{Evidence, Family, Linear, Method, Reading, Record, Sides};

/// A cause that explains a failing run.
#[derive(Clone, Debug, PartialEq)]
pub struct Cause {
    /// What it is.
    pub kind: Kind,
    /// What, where, the number and what to change.
    pub text: String,
    /// The number alone: a factor, an offset, a time, a count of rows.
    pub number: Option<f64>,
    /// The part of the error that it leaves.
    pub left_over: f64,
    /// The method that explains the rest, where one of the catalogue does.
    pub method: Option<&'static Method>,
}

/// A failing run and all that is known of it.
#[derive(Clone, Copy, Debug)]
pub struct Trouble<'a> {
    /// The model.
    pub linear: &'a Linear,
    /// The rows.
    pub record: &'a Record,
    /// What methods fit them.
    pub evidence: &'a Evidence,
    /// What that says of the claim.
    pub answer: Option<&'a Answer>,
    /// The claimed method, by all that it can mean.
    pub methods: &'a [&'static Method],
    /// The step as stated.
    pub step: Option<f64>,
    /// Names and units of all channels of the case.
    pub channels: &'a [(String, String)],
    /// Names of the inputs.
    pub inputs: &'a [String],
    /// The parameters of the case.
    pub parameters: &'a Parameters<'a>,
    /// The unit of time.
    pub time_unit: &'a str,
}

impl Trouble<'_> {
    /// True for the methods that the claim means.
    fn is_claimed(&self, method: &Method) -> bool {
        self.methods.iter().any(|own| own.name == method.name)
    }

    /// True for a family with one of them in it.
    fn is_of_claim(&self, family: &Family) -> bool {
        family.methods.iter().any(|method| self.is_claimed(method))
    }
}

/// Names for sentences.
#[derive(Debug)]
struct Names<'a> {
    /// Of the columns.
    columns: Vec<(String, String)>,
    states: &'a [(String, String)],
    inputs: &'a [String],
    time_unit: &'a str,
}

impl Names<'_> {
    fn channel(&self, column: usize) -> String {
        self.columns
            .get(column)
            .map_or(String::new(), |(name, _)| format!("`{name}`"))
    }

    fn unit(&self, column: usize) -> &str {
        self.columns
            .get(column)
            .map_or("", |(_, unit)| unit.as_str())
    }

    fn list(&self, columns: &[usize]) -> String {
        let names: Vec<String> = columns.iter().map(|&column| self.channel(column)).collect();
        names.join(", ")
    }
}

/// A hypothesis with what it predicts.
#[derive(Clone, Debug)]
struct Candidate {
    kind: Kind,
    /// How much it assumes: numbers that were looked for, channels that were picked.
    complexity: u8,
    number: Option<f64>,
    values: Vec<f64>,
    text: String,
}

impl Candidate {
    fn new(
        kind: Kind,
        complexity: u8,
        number: Option<f64>,
        values: Vec<f64>,
        text: String,
    ) -> Candidate {
        Candidate {
            kind,
            complexity,
            number,
            values,
            text,
        }
    }
}

/// Single precision is the cause where the method run without it leaves less than this part.
const MOSTLY: f64 = 0.5;
/// Methods that are asked whether they come from the start of the case to the rows.
const MOST_TRIED: usize = 24;
/// Causes named at most.
const MOST_NAMED: usize = 4;

/// The causes that explain a failing run; none where nothing does.
pub fn causes(trouble: &Trouble) -> Vec<Cause> {
    let rows = Rows::new(trouble.record);
    if rows.len() < 5 || rows.width() == 0 {
        return Vec::new();
    }
    let column = |&channel: &usize| trouble.channels.get(channel).cloned().unwrap_or_default();
    let names = Names {
        columns: rows.channels.iter().map(column).collect(),
        states: trouble.channels,
        inputs: trouble.inputs,
        time_unit: trouble.time_unit,
    };
    let before = rows.gap(&rows.exact);
    let families = explaining_families(trouble);
    let pairs = families
        .iter()
        .flat_map(|family| family.methods.iter().map(move |&method| (*family, method)));
    let pairs: Vec<_> = pairs.take(MOST_TRIED).collect();
    let by_method = pairs
        .par_iter()
        .find_map_first(|pair| of_method(trouble, &rows, &names, *pair, before));
    let mut found = by_method.unwrap_or_else(|| faults::of_faults(trouble, &rows, &names, before));
    if found.is_empty()
        && let Some(family) = families.first()
        && let (Some(&method), Some(step)) = (family.methods.first(), family.step)
    {
        let all = Stepping::all(method, trouble.linear, step).into_iter();
        let candidates = all.filter_map(|stepping| {
            jumps::wrong_side(trouble.linear, &rows, &names, &stepping, before)
        });
        found.extend(candidates.map(|candidate| ranked(candidate, 1.0, Some(method), 0.0)));
    }
    let mut causes = chosen(found, trouble);
    if trouble.evidence.is_exact() {
        // What digits and roundings explain has no other cause than these.
        causes.retain(|cause| cause.kind == Kind::SinglePrecision);
    }
    causes
}

/// A cause with what orders it among others.
type Ranked = (u8, f64, Cause);

fn chosen(mut found: Vec<Ranked>, trouble: &Trouble) -> Vec<Cause> {
    // Of equal explanations those with the claimed method at work leave no room for others.
    let is_own = |method: &'static Method| trouble.is_claimed(method);
    if found.iter().any(|one| one.2.method.is_some_and(is_own)) {
        found.retain(|one| one.2.method.is_none_or(is_own));
    }
    let other = |one: &Ranked| !one.2.method.is_some_and(is_own);
    found.sort_by(|a, b| {
        let order = a.0.cmp(&b.0).then(other(a).cmp(&other(b)));
        order.then(a.1.total_cmp(&b.1))
    });
    let Some(simplest) = found.first().map(|first| first.0) else {
        return Vec::new();
    };
    found.retain(|one| one.0 == simplest);
    let mut causes: Vec<Cause> = Vec::new();
    for (_, _, cause) in found {
        if causes
            .iter()
            .all(|known| known.kind != cause.kind || known.text != cause.text)
            && causes
                .iter()
                .filter(|known| known.kind == cause.kind)
                .count()
                < 2
        {
            causes.push(cause);
        }
    }
    causes.truncate(MOST_NAMED);
    causes
}

/// Families that explain the rows without any fault, those of the claimed method first.
fn explaining_families<'a>(trouble: &Trouble<'a>) -> Vec<&'a Family> {
    let evidence: &'a Evidence = trouble.evidence;
    if evidence.is_exact() {
        return Vec::new();
    }
    // With a start of its own choosing and ever smaller steps many a method meets the rows.
    let by_chance = |family: &Family| family.free && family.steps > Family::MANY_STEPS;
    let named =
        |family: &&Family| trouble.is_of_claim(family) || (family.is_told() && !by_chance(family));
    let mut families: Vec<&Family> = evidence.consistent.iter().filter(named).collect();
    families.sort_by_key(|family| !trouble.is_of_claim(family));
    families
}

fn ranked(
    candidate: Candidate,
    left_over: f64,
    method: Option<&'static Method>,
    ratio: f64,
) -> Ranked {
    (
        candidate.complexity,
        ratio,
        Cause {
            kind: candidate.kind,
            text: candidate.text,
            number: candidate.number,
            left_over,
            method,
        },
    )
}

/// The rows are those of a method: what is wrong lies in it, in its step, or in how it
/// reads inputs. `None` where every row follows from the one before, yet the method does not
/// come to them from the start of the case through all its jumps.
fn of_method(
    trouble: &Trouble,
    rows: &Rows,
    names: &Names,
    (family, method): (&Family, &'static Method),
    before: Gap,
) -> Option<Vec<Ranked>> {
    let linear = trouble.linear;
    let done = |candidates: Vec<Candidate>| {
        let named = candidates
            .into_iter()
            .map(|c| ranked(c, 1.0, Some(method), 0.0));
        Some(named.collect::<Vec<Ranked>>())
    };
    let mut candidates: Vec<Candidate> = not_as_claimed(trouble, family).into_iter().collect();
    let Some(step) = family.step else {
        return done(candidates);
    };
    if family.is_told() && family.reading == Reading::AtNodes {
        candidates.extend(method::low_order_start(linear, rows, method, step));
    }
    // Which value counted at a jump is the program's own business.
    let own = Stepping::all(method, linear, step)
        .into_iter()
        .flat_map(|stepping| {
            [Sides::After, Sides::Own, Sides::Before].map(|sides| Stepping {
                reading: family.reading,
                sides,
                ..stepping.clone()
            })
        });
    let way = own.map(Way::Stepped).find(|way| {
        let gap = trajectory(linear, rows, way).map(|values| rows.gap(&values));
        gap.is_some_and(|gap| gap.closes(before))
    });
    let has_memory = method.steps_back() > 1;
    let Some(way) = way else {
        // The start of a method with a memory is its own business.
        if has_memory {
            let own = method::candidates(linear, rows, names, method, step, &rows.written);
            candidates.extend(own.into_iter().filter(|own| own.kind == Kind::UnstableStep));
        }
        let told = has_memory && !candidates.is_empty();
        return told.then(|| done(candidates)).flatten();
    };
    candidates.extend(method::candidates(
        linear,
        rows,
        names,
        method,
        step,
        &rows.written,
    ));
    candidates.extend(jumps::jumps(linear, rows, names, &way));
    if let Way::Stepped(stepping) = &way
        && stepping.sides == Sides::Before
    {
        // An input that is a step late can look the same.
        let after = Way::Stepped(Stepping {
            sides: Sides::After,
            ..stepping.clone()
        });
        let late = model::moved_inputs(linear, rows, names, &after, step, before).into_iter();
        candidates.extend(
            late.filter(|late| late.kind == Kind::InputLate && rows.gap(&late.values).is_closed())
                .map(|late| Candidate {
                    complexity: 0,
                    ..late
                }),
        );
    }
    if family.reading == Reading::Held {
        candidates.extend(model::held_as_found(linear, rows, names, &way, step));
    }
    if trouble.record.unit > f64::EPSILON
        && let Some(exactly_run) = trajectory(linear, rows, &way)
        && rows.error_of(&exactly_run) < MOSTLY * before.share
    {
        candidates.extend(written::single_arithmetic());
    }
    done(candidates)
}

/// Another step or another method than the claimed one.
fn not_as_claimed(trouble: &Trouble, family: &Family) -> Option<Candidate> {
    let answer = trouble.answer?;
    if answer.support != Support::Contradicts || trouble.methods.is_empty() {
        return None;
    }
    let claimed = trouble.is_of_claim(family);
    let longer = family
        .step
        .zip(trouble.step)
        .is_some_and(|(own, stated)| own > stated);
    let at = family_at(family, trouble.time_unit);
    let (kind, what) = match (claimed, longer) {
        (true, true) => (Kind::CoarserStep, "a coarser step than stated"),
        (true, false) => return None,
        (false, _) => (Kind::OtherMethod, "another method than claimed"),
    };
    let text = format!("{what}: the rows are those of {at}");
    Some(Candidate::new(kind, 0, family.step, Vec::new(), text))
}
