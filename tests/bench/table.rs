//! Trajectory files of a chain: text of given digits, with the small and smooth error that a
//! simulator of fine steps would leave.

use std::fmt::{self, Write as _};
use std::io::{BufWriter, Write as _};
use std::path::Path;

use stepgauge::Exact;
use stepgauge::number::Double;

use crate::chain::{self, SPAN};
use crate::stamps::Stamps;

/// What a simulator of fine steps would leave, in kelvin; the limits of the chains are near 1e-6
/// and above.
pub const ERROR: f64 = 1e-9;

/// What a file looks like.
#[derive(Clone, Copy, Debug)]
pub struct Shape {
    pub steps: usize,
    pub states: usize,
    pub digits: usize,
    pub stamps: Stamps,
    /// The largest, in kelvin.
    pub error: f64,
}

impl fmt::Display for Shape {
    fn fmt(&self, f: &mut fmt::Formatter) -> fmt::Result {
        let Shape {
            steps,
            states,
            digits,
            stamps,
            ..
        } = self;
        write!(
            f,
            "states {states}, digits {digits}, {stamps}, rows {steps}"
        )
    }
}

impl Shape {
    /// Every mixture of digits and stamps.
    pub fn all(sizes: impl IntoIterator<Item = (usize, usize)>) -> Vec<Shape> {
        let mut shapes = Vec::new();
        for (steps, states) in sizes {
            for digits in [17, 6] {
                shapes.extend(Stamps::ALL.map(|stamps| Shape {
                    steps,
                    states,
                    digits,
                    stamps,
                    error: ERROR,
                }));
            }
        }
        shapes
    }

    /// Writes the file; its size in bytes.
    pub fn write(&self, path: &Path) -> u64 {
        let Shape {
            steps,
            states,
            digits,
            stamps,
            error,
        } = *self;
        let exact = chain::case(states).exact().unwrap();
        let mut file = BufWriter::new(std::fs::File::create(path).unwrap());
        let names: Vec<String> = (1..=states).map(|node| format!("T{node}")).collect();
        writeln!(file, "t,{}", names.join(",")).unwrap();
        let (mut line, mut number) = (String::new(), 0);
        let mean_step = SPAN / steps as f64;
        values(
            &exact,
            stamps.over(steps),
            mean_step,
            &mut |time, values| {
                line.clear();
                print(time, digits, &mut line);
                for (place, value) in values.iter().enumerate() {
                    line.push(',');
                    let wave = (f64::from(number) / 139.0 + place as f64).sin();
                    print(value + error * wave, digits, &mut line);
                }
                line.push('\n');
                file.write_all(line.as_bytes()).unwrap();
                number += 1;
            },
        );
        file.flush().unwrap();
        std::fs::metadata(path).unwrap().len()
    }
}

/// Exact values at rising times: around nodes where the rows are dense, as whole files of many
/// rows would otherwise take minutes to make.
fn values(
    exact: &Exact,
    times: impl Iterator<Item = f64>,
    mean_step: f64,
    each: &mut dyn FnMut(f64, &[f64]),
) {
    let nodes = exact.nodes(mean_step);
    let mut near = nodes.as_ref().map(|nodes| exact.near(nodes));
    let mut walk = exact.walk();
    let (mut row, mut moved) = (Vec::new(), Vec::new());
    for time in times {
        row.clear();
        let at = Double::from(time);
        let around = near.as_mut().and_then(|near| {
            let offset = near.offset(at, 0.0).or_else(|| near.place(at, 0.0))?;
            Some((offset, near.channels()))
        });
        match around {
            Some((offset, channels)) => row.extend(channels.iter().map(|channel| {
                channel.moved(&[offset], &mut moved);
                channel.value.to_f64() + (channel.value.low() + moved[0])
            })),
            None => row.extend(walk.go(at).value.iter().map(|value| value.to_f64())),
        }
        each(time, &row);
    }
}

/// A number to so many digits without zeros at its end.
fn print(value: f64, digits: usize, line: &mut String) {
    let size = value.abs().max(f64::MIN_POSITIVE).log10().floor() as i64;
    let decimals = if value == 0.0 {
        0
    } else {
        (digits as i64 - 1 - size).max(0) as usize
    };
    let start = line.len();
    let _ = write!(line, "{value:.decimals$}");
    if line[start..].contains('.') {
        let kept = line.trim_end_matches('0').trim_end_matches('.').len();
        line.truncate(kept);
    }
}
