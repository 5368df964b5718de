//! From the catalogue of methods to plain facts about them.

use super::args::MethodsArguments;
use crate::fault::{Fault, nearest, quoted};
use crate::method::{
    Characteristic, Coefficients, METHODS, Method, Rational, Scheme, Slopes, Stages,
    approx_stability, find_all,
};
use crate::number::Double;
use crate::outcome::{AliasFacts, Factor, FormFacts, MethodFacts, SourceFacts, Written};
use crate::references;
use crate::report::{Screen, method_list, method_text};

/// How many near misses are named.
const NEAR_MISSES: usize = 4;

/// What `methods` prints.
pub fn methods_text(arguments: &MethodsArguments, screen: Screen) -> Result<String, Fault> {
    if arguments.names {
        let names = METHODS.iter().map(|method| format!("{}\n", method.name));
        return Ok(names.collect());
    }
    if arguments.name.is_empty() {
        let all: Vec<MethodFacts> = METHODS.iter().map(facts).collect();
        return Ok(method_list(&all, screen));
    }
    // A name of several words needs no quotes.
    let name = arguments.name.join(" ");
    let found = find_all(&name);
    if found.is_empty() {
        return Err(unknown(&name));
    }
    let found: Vec<MethodFacts> = found.into_iter().map(facts).collect();
    Ok(method_text(&quoted(&name), &found, screen))
}

fn unknown(name: &str) -> Fault {
    let mut near: Vec<&str> = Vec::new();
    for _ in 0..NEAR_MISSES {
        let known = METHODS.iter().flat_map(|method| {
            let names = [method.name].into_iter();
            names.chain(method.aliases.iter().copied())
        });
        match nearest(name, known.filter(|known| !near.contains(known))) {
            Some(next) => near.push(next),
            None => break,
        }
    }
    let near: Vec<String> = near.iter().map(|name| format!("`{name}`")).collect();
    let fault = Fault::new(format!("there is no method {}", quoted(name)));
    let list = "`stepgauge methods` lists all";
    fault.help(match near.split_last() {
        None => list.to_owned(),
        Some((last, [])) => format!("did you mean {last}? {list}"),
        Some((last, others)) => {
            format!("did you mean {} or {last}? {list}", others.join(", "))
        }
    })
}

fn facts(method: &Method) -> MethodFacts {
    let alias = |&name: &&'static str| AliasFacts {
        name,
        shared_with: find_all(name)
            .into_iter()
            .filter(|other| other.name != method.name)
            .map(|other| other.name)
            .collect(),
    };
    let form = |scheme: &Scheme| form(scheme, usize::from(method.order));
    MethodFacts {
        name: method.name,
        aliases: method.aliases.iter().map(alias).collect(),
        order: method.order,
        sources: sources(method.source),
        forms: method.schemes.iter().map(form).collect(),
    }
}

/// `[tag] place, [tag] place`.
fn sources(text: &'static str) -> Vec<SourceFacts> {
    let parts = text.split('[').skip(1);
    let known = parts.filter_map(|part| {
        let (tag, place) = part.split_once(']')?;
        Some(SourceFacts {
            tag,
            place: place.trim_matches([' ', ',']),
            text: references::source(tag)?,
        })
    });
    known.collect()
}

fn form(scheme: &Scheme, order: usize) -> FormFacts {
    let coefficients = scheme.coefficients();
    let stability = approx_stability(&coefficients);
    let characteristic = Characteristic::new(&coefficients);
    let error_constant = characteristic.as_ref().map(|characteristic| {
        let series = characteristic.series(order + 2);
        let powers = (1..=order + 1).map(|k| Double::from(k as f64));
        series[order + 1] - powers.fold(Double::ONE, |term, k| term / k)
    });
    let factor = match (&coefficients, characteristic) {
        (Coefficients::Stages(stages), _) => {
            let Rational {
                numerator,
                denominator,
            } = Rational::new(stages);
            Factor::Quotient {
                numerator,
                denominator,
            }
        }
        (_, Some(characteristic)) => Factor::Equation(characteristic.terms),
        (Coefficients::Exponential { .. }, None) => Factor::Exponential,
        (_, None) => Factor::Oscillator,
    };
    FormFacts {
        written: written(scheme, &coefficients),
        implicit: scheme.is_implicit(),
        factor,
        real: stability.real,
        imaginary: stability.imaginary,
        a_stable: stability.a_stable,
        l_stable: stability.l_stable,
        angle: stability.angle,
        error_constant,
    }
}

fn written(scheme: &Scheme, coefficients: &Coefficients) -> Written {
    let row = |text: &'static str| text.split_whitespace().collect::<Vec<_>>();
    let rows = |text: &'static str| text.split(';').map(row).collect();
    let nodes = match coefficients {
        Coefficients::Stages(Stages { nodes, .. }) => nodes.clone(),
        _ => Vec::new(),
    };
    match *scheme {
        Scheme::RungeKutta { matrix, weights } => Written::Tableau {
            nodes,
            matrix: rows(matrix),
            weights: row(weights),
        },
        Scheme::Rosenbrock {
            gamma,
            alpha,
            shift,
            weights,
            slopes,
        } => Written::LinearlyImplicit {
            nodes,
            gamma,
            alpha: rows(alpha),
            shift: rows(shift),
            weights: row(weights),
            slopes: match slopes {
                Slopes::Known => Some(None),
                Slopes::Ahead(part) => Some(Some(part)),
                Slopes::Left => None,
            },
        },
        Scheme::Multistep { alpha, beta } => Written::Multistep {
            alpha: row(alpha),
            beta: row(beta),
        },
        Scheme::Predicted {
            predictor,
            corrector,
        } => Written::Predicted {
            predictor: row(predictor),
            corrector: row(corrector),
        },
        Scheme::SemiImplicit => Written::SemiImplicit,
        Scheme::Exponential { by_state } => Written::Exponential { by_state },
    }
}
