//! Which method wrote a file: over a matrix of methods, cases, steps, digits and internal
//! steps the true pair is always found consistent, and false ones are not.

use crate::writer::{Run, Start, record};
use stepgauge::Library;
use stepgauge::method::{Linear, METHODS, evidence};

const CASES: [&str; 12] = [
    "electrical/rc-discharge",
    "electrical/rlc-series",
    "thermal/cold-room-defrost",
    "mechanical/oscillator-undamped",
    "kinetics/oral-dose",
    "control/dc-motor",
    "electrical/rc-step",
    "mechanical/oscillator-driven",
    "stress/jordan-4",
    "thermal/cooling-body",
    "membrane/passive-patch",
    "decay/three-member-chain",
];

#[test]
fn probe() {
    let library = Library::new();
    for name in library.names() {
        println!("{name}");
    }
    let names: Vec<String> = library.names().map(str::to_owned).collect();
    let mut bad = 0;
    let mut count = 0;
    let t0 = std::time::Instant::now();
    for name in names
        .iter()
        .filter(|n| std::env::var("ONLY").map_or(true, |o| n.contains(&o)))
    {
        let case = library.load(name, &Default::default()).unwrap();
        let linear = Linear::new(&case);
        if linear.size() > 4 {
            continue;
        }
        let scales = stepgauge::exact::approx_time_scales(&case);
        let span = linear.window.1 - linear.window.0;
        let fast = scales
            .time_constant
            .unwrap_or(span)
            .min(scales.period.unwrap_or(span) / 6.0)
            .min(span / 10.0);
        for method in METHODS {
            for (factor, steps) in [(0.5, 1), (0.25, 4), (0.1, 10)] {
                for digits in [6, 9, 17] {
                    let spacing = fast * factor;
                    let rows = ((span / spacing) as usize).min(50) + 1;
                    if rows < 12 {
                        continue;
                    }
                    let run = Run {
                        case: &case,
                        method,
                        scheme: 0,
                        spacing,
                        steps,
                        rows,
                        start: Start::Runge,
                        summed: false,
                    };
                    let (times, states) = run.states();
                    let record = record(&case, &times, &states, spacing, digits);
                    let t1 = std::time::Instant::now();
                    let found = evidence(&linear, &record, &[method], &[steps]);
                    let dt = t1.elapsed().as_secs_f64();
                    if dt > 0.2 {
                        println!("slow {name} {} x{steps} {digits} {dt}", method.name);
                    }
                    count += 1;
                    let hit = found.consistent.iter().find(|f| {
                        (f.range.0..=f.range.1).contains(&steps)
                            && f.methods.iter().any(|m| m.name == method.name)
                    });
                    let at = found.best(&[method], Some(steps));
                    let _ = hit;
                    if !at.is_some_and(|t| t.fit.holds()) {
                        bad += 1;
                        if bad < 60 {
                            let best = found.best(&[method], None).map(|t| (t.steps, t.fit));
                            let at = found.best(&[method], Some(steps)).map(|t| (t.steps, t.fit));
                            println!(
                                "{name} {} x{steps} {digits}: at {at:?} best {best:?} consistent {:?}",
                                method.name,
                                found
                                    .consistent
                                    .iter()
                                    .map(|f| (f.methods[0].name, f.steps, f.fit.ratio))
                                    .take(4)
                                    .collect::<Vec<_>>()
                            );
                        }
                    }
                }
            }
        }
        println!(
            "{name} {} states: {count} {bad} {:?}",
            linear.size(),
            t0.elapsed()
        );
    }
    println!("{bad} of {count} {:?}", t0.elapsed());
}
