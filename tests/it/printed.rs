//! Whole files of honest programs through the audit: a true claim is never contradicted,
//! and agrees where the digits allow.

use stepgauge::judge::Support;
use stepgauge::method::Linear;

use crate::causes::{Base, Track, judge};
use crate::evidence::{CASES, load, rows, shared, variants};
use crate::writer::{Run, Start};

struct Told {
    digits: usize,
    support: Option<Support>,
    text: String,
}

fn print(value: f64, digits: usize) -> String {
    match digits {
        17 => format!("{value:?}"),
        _ => format!("{value:.*e}", digits - 1),
    }
}

#[test]
fn printed_files_are_never_contradicted() {
    let cases: Vec<usize> = (0..CASES.len()).collect();
    let told = shared(&cases, |&index| {
        let (name, spacings) = CASES[index];
        let case = load(name);
        let linear = Linear::new(&case);
        let mut told = Vec::new();
        let mut number = 13 * index;
        for spacing in spacings {
            for (method, scheme) in variants() {
                for steps in [1, 4] {
                    number += 1;
                    if number % 67 != 0 {
                        continue;
                    }
                    let count = rows(&linear, spacing);
                    let h = spacing / steps as f64;
                    let run = Run {
                        scheme,
                        start: Start::Euler,
                        summed: true,
                        ..Run::new(&case, method, spacing, steps, count)
                    };
                    let (mut times, rows) = run.states().unwrap();
                    // Stamps as the program has summed them.
                    let mut time = times[0];
                    for stamp in times.iter_mut().skip(1) {
                        for _ in 0..steps {
                            time += h;
                        }
                        *stamp = time;
                    }
                    let last = linear.window.1;
                    let fits = |k: &usize| {
                        let small = rows[*k].iter().all(|x| x.is_finite() && x.abs() < 1e30);
                        times[*k] <= last && small
                    };
                    let whole = (0..rows.len()).take_while(fits).count();
                    if whole < 12 {
                        continue;
                    }
                    let track = Track {
                        times: times[..whole].to_vec(),
                        rows: rows[..whole].to_vec(),
                        spacing,
                    };
                    for digits in [6, 9, 17] {
                        let base = Base::Method(method.name);
                        let audited = judge(&case, &track, base, Some(h), &|x| print(x, digits));
                        let run = &audited.evidence.as_ref().unwrap().runs[0];
                        told.push(Told {
                            digits,
                            support: run.support,
                            text: format!(
                                "{name} {}#{scheme} {spacing} x{steps} {digits} digits: {}",
                                method.name,
                                run.note.as_deref().unwrap_or_default()
                            ),
                        });
                    }
                }
            }
        }
        told
    });
    let mut contradicted = Vec::new();
    for digits in [6, 9, 17] {
        // What the digits or the rows hide from the start is not asked for.
        let hidden = |told: &&Told| {
            told.text.contains("the exact solution as well")
                || told.text.contains("between the jumps of the inputs")
        };
        let of = || {
            let told = told.iter().filter(|told| told.digits == digits);
            told.filter(|told| !hidden(told))
        };
        let agree = |told: &&Told| told.support == Some(Support::Agrees);
        let agreed = of().filter(agree).count();
        println!("{digits} digits: {agreed} of {} agree", of().count());
        let wrong = of().filter(|told| told.support == Some(Support::Contradicts));
        contradicted.extend(wrong.map(|told| told.text.as_str()));
        if std::env::var("SHOW").is_ok() {
            let open: Vec<&str> = of()
                .filter(|t| !agree(t))
                .map(|t| t.text.as_str())
                .collect();
            println!("{}", open.join("\n"));
        }
        if digits > 6 {
            assert!(
                agreed as f64 >= 0.9 * of().count() as f64,
                "{digits}: {agreed}"
            );
        }
    }
    assert!(contradicted.is_empty(), "{}", contradicted.join("\n"));
}
