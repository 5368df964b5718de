//! Files of other programs: the method that a library documents is found in what it
//! wrote, and what an adaptive or unknown method wrote is put down to no other one.

use std::path::{Path, PathBuf};

use serde_json::Value;
use stepgauge::audit::{Plan, Planned, audit};
use stepgauge::case::Library;
use stepgauge::judge::Support;
use stepgauge::outcome::Audited;
use stepgauge::submission::{Claims, Run, Setting, Submission};

fn folder() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/outside/integrators")
}

/// Method of the catalogue behind a name of a library, and steps of it to one of the
/// library's; `None` where the catalogue has none.
fn documented(library: &str, method: &str) -> Option<(&'static str, u64)> {
    let has = |part: &str| method.contains(part);
    let found = match library {
        "SciPy" if has("'RK23'") => ("Bogacki-Shampine 3", 1),
        "SciPy" if has("'RK45'") => ("Dormand-Prince 5", 1),
        "SciPy" if has("'Radau'") => ("Radau IIA 5", 1),
        "GNU Octave" if has("ode45") => ("Dormand-Prince 5", 1),
        "GNU Octave" if has("ode23s") => ("Rosenbrock 2", 1),
        "GNU Octave" if has("ode23") => ("Bogacki-Shampine 3", 1),
        "deSolve" if has("'euler'") => ("forward Euler", 1),
        "deSolve" if has("'rk2'") => ("Heun", 1),
        "deSolve" if has("'rk4'") => ("classical RK4", 1),
        "deSolve" if has("'rk23bs'") => ("Bogacki-Shampine 3", 1),
        "deSolve" if has("'irk3r'") => ("Radau IIA 3", 1),
        "deSolve" if has("'irk5r'") => ("Radau IIA 5", 1),
        "deSolve" if has("'ode45'") => ("Dormand-Prince 5", 1),
        // make_gsl.c: these take two half steps to a step.
        "GNU Scientific Library" if has("rk1imp") => ("backward Euler", 2),
        "GNU Scientific Library" if has("rk2imp") => ("implicit midpoint", 2),
        "GNU Scientific Library" if has("rk4imp") => ("Gauss 4", 2),
        "GNU Scientific Library" if has("rk4") => ("classical RK4", 2),
        // The embedded (2, 3) pair goes on from its third-order result, Kutta's.
        "GNU Scientific Library" if has("step_rk2 ") => ("Kutta 3", 1),
        "GNU Scientific Library" if has("rkck") => ("Cash-Karp 5", 1),
        "GNU Scientific Library" if has("rkf45") => ("Runge-Kutta-Fehlberg 5", 1),
        "Boost.Numeric.Odeint" if has("moulton<3>") => ("Adams-Bashforth-Moulton 3", 1),
        "Boost.Numeric.Odeint" if has("bashforth<2>") => ("Adams-Bashforth 2", 1),
        "Boost.Numeric.Odeint" if has("bashforth<3>") => ("Adams-Bashforth 3", 1),
        "Boost.Numeric.Odeint" if has("bashforth<5>") => ("Adams-Bashforth 5", 1),
        "Boost.Numeric.Odeint" if has("implicit_euler") => ("backward Euler", 1),
        "Boost.Numeric.Odeint" if has("symplectic_euler") => ("semi-implicit Euler", 1),
        "Boost.Numeric.Odeint" if has("euler") => ("forward Euler", 1),
        "Boost.Numeric.Odeint" if has("runge_kutta4") => ("classical RK4", 1),
        "Boost.Numeric.Odeint" if has("cash_karp") => ("Cash-Karp 5", 1),
        "Boost.Numeric.Odeint" if has("dopri5") => ("Dormand-Prince 5", 1),
        _ => return None,
    };
    Some(found)
}

fn run(files: &[(Value, Option<&str>)]) -> Vec<Audited> {
    let mut library = Library::new();
    library.add_folder(&folder().join("cases")).unwrap();
    let planned = |(index, (entry, method)): (usize, &(Value, Option<&str>))| {
        let file = entry["file"].as_str().unwrap();
        let step = entry["step"].as_f64();
        Planned {
            name: index.to_string(),
            submission: Submission {
                case: Some(entry["case"].as_str().unwrap().to_owned()),
                claims: Claims {
                    method: method.map(str::to_owned),
                    ..Claims::default()
                },
                runs: vec![Run {
                    file: file.to_owned(),
                    path: folder().join("runs").join(file),
                    setting: match (method, step) {
                        (Some(_), Some(step)) => {
                            let library = entry["library"].as_str().unwrap();
                            let name = entry["method"].as_str().unwrap();
                            let halves = documented(library, name).map_or(1, |(_, n)| n);
                            Setting::Step(step / halves as f64)
                        }
                        _ => Setting::Unstated,
                    },
                    role: None,
                    cost: None,
                    text: None,
                }],
                ..Submission::default()
            },
            file: None,
            reviewed: Default::default(),
        }
    };
    let outcome = audit(&Plan {
        library,
        submissions: files.iter().enumerate().map(planned).collect(),
        unreadable: Vec::new(),
        threads: 2,
        traced: false,
        part: None,
    });
    assert!(outcome.not_audited.is_empty(), "{:?}", outcome.not_audited);
    outcome.submissions
}

fn manifest() -> Vec<Value> {
    let text = std::fs::read_to_string(folder().join("runs/manifest.json")).unwrap();
    let manifest: Value = serde_json::from_str(&text).unwrap();
    manifest.as_array().unwrap().clone()
}

#[test]
fn documented_methods_are_found_and_no_others() {
    let claimed: Vec<(Value, Option<&str>)> = manifest()
        .into_iter()
        .map(|entry| {
            let library = entry["library"].as_str().unwrap();
            let method = entry["method"].as_str().unwrap();
            let method = documented(library, method).map(|(name, _)| name);
            // Rows between the steps are no steps.
            let method = method.filter(|_| entry["kind"] != "interpolated");
            (entry, method)
        })
        .collect();
    let open: Vec<(Value, Option<&str>)> = claimed
        .iter()
        .map(|(entry, _)| (entry.clone(), None))
        .collect();
    let (answers, alone) = (run(&claimed), run(&open));
    let (mut attributed, mut wrong) = (0, Vec::new());
    let (mut outside, mut exact) = (0, 0);
    for (((entry, method), answer), alone) in claimed.iter().zip(answers).zip(alone) {
        let file = entry["file"].as_str().unwrap();
        let found = &answer.evidence.as_ref().unwrap().runs[0];
        let alone = alone.evidence.as_ref().unwrap();
        let is_exact = alone.runs[0].exact;
        exact += usize::from(is_exact);
        let names = &alone.families;
        let said = format!(
            "{file}: {method:?} {:?} exact {is_exact}, alone {names:?} {:?}; {}",
            found.support,
            alone.runs[0]
                .consistent
                .iter()
                .map(|c| c.steps_per_row)
                .collect::<Vec<_>>(),
            found.note.as_deref().unwrap_or_default()
        );
        if std::env::var("SHOW").is_ok() {
            println!("{said}");
        }
        match method {
            Some(method) => {
                let agrees = found.support == Some(Support::Agrees);
                attributed += usize::from(agrees);
                let missing = !names.is_empty() && !names.iter().any(|name| name == method);
                let refused = found.support == Some(Support::Contradicts);
                if refused || missing {
                    wrong.push(said);
                }
            }
            None => {
                outside += 1;
                if !is_exact && !names.is_empty() {
                    wrong.push(said);
                }
            }
        }
    }
    println!(
        "{attributed} files agree with the method documented, {outside} of other methods, \
         {exact} exact, {} wrong",
        wrong.len()
    );
    assert!(wrong.is_empty(), "{}", wrong.join("\n"));
    assert!(attributed >= 40, "{attributed}");
}
