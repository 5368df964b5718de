//! Which step a case needs: methods and limits as asked for.

use super::args::StepsArguments;
use crate::case::Case;
use crate::compare::Limit;
use crate::exact::Exact;
use crate::explain::{self, MOST_STEPS, Question};
use crate::fault::{Fault, nearest, quoted};
use crate::method::{METHODS, Method, find_all};
use crate::number::{Decimal, Double, plain};
use crate::outcome::StepsOutcome;

/// Methods that are asked about unless others are named: explicit and implicit ones of
/// the first order and the second, and the usual one of the fourth.
const USUAL: [&str; 5] = [
    "forward Euler",
    "backward Euler",
    "trapezoidal",
    "Heun",
    "classical RK4",
];

/// Runs the methods over the case.
///
/// # Errors
/// Methods that are not in the catalogue, steps that cannot be run.
pub(super) fn steps(
    arguments: &StepsArguments,
    case: &Case,
    exact: &Exact,
) -> Result<StepsOutcome, Vec<Fault>> {
    let limit = Limit {
        absolute: arguments.absolute.unwrap_or(case.limits.absolute),
        relative: arguments.relative.unwrap_or(case.limits.relative),
        of_peak: false,
    };
    let limits = vec![Some(limit); case.channels().len()];
    let question = Question::new(case, exact, &limits);
    let mut faults = Vec::new();
    let mut methods: Vec<&Method> = Vec::new();
    let usual = || USUAL.iter().copied();
    let named = || arguments.methods.iter().map(String::as_str);
    let names: Vec<&str> = if arguments.methods.is_empty() {
        usual().collect()
    } else {
        named().collect()
    };
    for name in names {
        // Some names are those of several methods.
        let found = find_all(name);
        if found.is_empty() {
            faults.push(unknown(name));
        }
        for method in found {
            if methods.iter().all(|known| known.name != method.name) {
                methods.push(method);
            }
        }
    }
    let mut stated = Vec::new();
    for &step in &arguments.steps {
        match stated_step(&question, step) {
            Ok(step) => stated.push(step),
            Err(fault) => faults.push(fault),
        }
    }
    if !faults.is_empty() {
        return Err(faults);
    }
    Ok(explain::steps(&question, &methods, &stated))
}

fn unknown(name: &str) -> Fault {
    let names = METHODS.iter().map(|method| method.name);
    let aliases = METHODS.iter().flat_map(|method| method.aliases);
    let near = nearest(name, names.chain(aliases.copied()));
    let fault = Fault::new(format!("--method: there is no method {}", quoted(name)));
    match near {
        Some(near) => fault.help(format!(
            "did you mean `{near}`? `stepgauge methods` lists all"
        )),
        None => fault.help("`stepgauge methods` lists all"),
    }
}

/// The step as it was written, in decimals.
fn stated_step(question: &Question, step: f64) -> Result<Double, Fault> {
    let step = Decimal::shortest(step).map_or(Double::from(step), Decimal::to_double);
    let count = question.filled(step).count;
    let shown = plain(step.to_f64());
    let (span, unit) = (question.span().to_f64(), &question.case.time.unit);
    if count == 0 {
        let text = format!("--step {shown} is longer than the window");
        return Err(Fault::new(text).help(format!("the window has {} {unit}", plain(span))));
    }
    if count > MOST_STEPS {
        let text = format!("--step {shown} is {count} steps over the window");
        let shortest = plain(span / MOST_STEPS as f64);
        return Err(Fault::new(text).help(format!(
            "at most {MOST_STEPS} are run: {shortest} {unit} or longer"
        )));
    }
    Ok(step)
}
