//! Exact values of all channels at the stamps of a file, without the file:
//! `cargo bench --bench exact`.

mod chain;
mod chance;
mod stamps;

use std::fmt;

use chain::{LENGTHS, SPAN};
use divan::Bencher;
use divan::counter::ItemsCount;
use stamps::Stamps;
use stepgauge::Exact;
use stepgauge::exact::{Near, Nodes};
use stepgauge::number::Double;

/// Rows where they are dense, and where they are few.
const MANY: usize = 100_000;
const FEW: usize = 2_000;
/// An audit begins anew after so many rows, since they may be another thread's.
const CHUNK: usize = 8192;

fn main() {
    divan::main();
}

#[derive(Clone, Copy, Debug)]
struct Setting {
    states: usize,
    stamps: Stamps,
}

impl fmt::Display for Setting {
    fn fmt(&self, f: &mut fmt::Formatter) -> fmt::Result {
        write!(f, "states {}, {}", self.states, self.stamps)
    }
}

fn settings() -> Vec<Setting> {
    let of_length = |states| Stamps::ALL.map(|stamps| Setting { states, stamps });
    LENGTHS.into_iter().flat_map(of_length).collect()
}

/// A case to its solution: what is done once, however long the file.
#[divan::bench(args = LENGTHS, sample_size = 1, sample_count = 20)]
fn solution(bencher: Bencher, states: usize) {
    let case = chain::case(states);
    bencher.bench_local(|| case.exact().unwrap());
}

/// The table behind the nodes of dense rows: once for every file.
#[divan::bench(args = LENGTHS, sample_size = 1, sample_count = 20)]
fn nodes(bencher: Bencher, states: usize) {
    let exact = chain::case(states).exact().unwrap();
    bencher.bench_local(|| exact.nodes(SPAN / MANY as f64).unwrap());
}

/// Around nodes, in plain `f64`: the way of an audit through dense rows.
#[divan::bench(args = settings(), sample_size = 1, sample_count = 20)]
fn near(bencher: Bencher, setting: &Setting) {
    let exact = chain::case(setting.states).exact().unwrap();
    let nodes = exact.nodes(SPAN / MANY as f64).unwrap();
    let times: Vec<f64> = setting.stamps.over(MANY).collect();
    bencher
        .counter(ItemsCount::new(times.len() * setting.states))
        .bench_local(|| {
            for chunk in times.chunks(CHUNK) {
                near_nodes(&exact, &nodes, chunk);
            }
        });
}

/// Row after row in double-double, where they are few.
#[divan::bench(args = settings(), sample_size = 1, sample_count = 20)]
fn walk(bencher: Bencher, setting: &Setting) {
    let times = setting.stamps.over(FEW).collect();
    walked(bencher, setting.states, times);
}

/// The same where they are dense: the way of an audit whose limits need sharper values.
#[divan::bench(args = settings(), sample_size = 1, sample_count = 20)]
fn walk_dense(bencher: Bencher, setting: &Setting) {
    let times = setting.stamps.over(MANY).take(FEW).collect();
    walked(bencher, setting.states, times);
}

fn walked(bencher: Bencher, states: usize, times: Vec<f64>) {
    let exact = chain::case(states).exact().unwrap();
    bencher
        .counter(ItemsCount::new(times.len() * states))
        .bench_local(|| {
            let mut walk = exact.walk();
            for &time in &times {
                divan::black_box(walk.go(Double::from(time)));
            }
        });
}

/// Rows are gathered as long as they share a node, and then taken channel by channel.
fn near_nodes(exact: &Exact, nodes: &Nodes, times: &[f64]) {
    let mut near = exact.near(nodes);
    let (mut offsets, mut values) = (Vec::new(), Vec::new());
    for &time in times {
        let time = Double::from(time);
        let clear = 4.0 * f64::EPSILON * time.to_f64().abs();
        let offset = near.offset(time, clear).or_else(|| {
            take(&near, &mut offsets, &mut values);
            near.place(time, clear)
        });
        offsets.extend(offset);
    }
    take(&near, &mut offsets, &mut values);
}

fn take(near: &Near, offsets: &mut Vec<f64>, values: &mut Vec<f64>) {
    for channel in near.channels() {
        channel.moved(offsets, values);
        let (high, low) = (channel.value.to_f64(), channel.value.low());
        values
            .iter_mut()
            .for_each(|moved| *moved = high + (low + *moved));
        divan::black_box(&mut *values);
    }
    offsets.clear();
}
