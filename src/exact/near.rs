//! The quick way to the exact solution where rows are dense: a grid of nodes whose vectors are
//! carried in double-double, and around each of them a short polynomial in plain `f64`. What a
//! row adds to the node is small beside the value, and with it what its rounding loses.

use super::Exact;
use crate::number::{Double, Expansion, Flow, Nearby, Step};

/// Rows that share a node, about: enough to pay for it, few enough to stay close to it.
const ROWS_OF_A_NODE: f64 = 128.0;
/// With fewer rows the way through double-double costs no more.
const FEWEST_ROWS: f64 = 4.0;
/// Nodes before the vector is computed directly again, so that nothing drifts.
const NODES_PER_ANCHOR: u32 = 256;

/// A grid of nodes for rows of some density.
#[derive(Debug)]
pub struct Nodes {
    spacing: f64,
    step: Step<Double>,
    terms: usize,
}

impl Exact {
    /// Nodes for rows that are `step` apart on the average; `None` where rows are so far apart
    /// that each would have a node of its own.
    pub fn nodes(&self, step: f64) -> Option<Nodes> {
        let base = self.table.base();
        let usable = step.is_finite() && step > 0.0 && FEWEST_ROWS * step <= base;
        if !usable {
            return None;
        }
        let halvings = (base / (ROWS_OF_A_NODE * step)).log2().ceil().max(0.0);
        let spacing = base * 2f64.powi(-(halvings as i32));
        Some(Nodes {
            spacing,
            step: self.table.tabulate(Double::from(spacing)),
            terms: self.table.terms_within(0.5 * spacing),
        })
    }

    /// A walk along times that mostly rise.
    pub fn near<'a>(&'a self, nodes: &'a Nodes) -> Near<'a> {
        let weights = |row: &Vec<Double>| row.iter().map(|w| w.to_f64().abs()).collect();
        Near {
            exact: self,
            nodes,
            node: None,
            flow: Flow::exact(Vec::new()),
            since_anchor: 0,
            expansion: Expansion::default(),
            weights: self.system.channels.iter().map(weights).collect(),
            channels: vec![Nearby::default(); self.system.channels.len()],
        }
    }
}

/// A place on the grid of nodes and what is known around it.
#[derive(Debug)]
pub struct Near<'a> {
    exact: &'a Exact,
    nodes: &'a Nodes,
    node: Option<Node>,
    flow: Flow<Double>,
    since_anchor: u32,
    expansion: Expansion,
    weights: Vec<Vec<f64>>,
    channels: Vec<Nearby>,
}

#[derive(Clone, Copy, Debug)]
struct Node {
    segment: usize,
    number: f64,
    time: Double,
    /// Offsets from it that belong to it.
    from: f64,
    to: f64,
    /// The nearest jumps on both sides, as offsets.
    jumps: (f64, f64),
}

impl Near<'_> {
    /// The offset of a time from the present node, where it belongs to it and no jump is closer
    /// than `clear`.
    pub fn offset(&self, time: Double, clear: f64) -> Option<f64> {
        let node = self.node.as_ref()?;
        // The difference of the upper words loses nothing that this close to the node counts.
        let high = time.to_f64() - node.time.to_f64();
        let offset = high + (time.low() - node.time.low());
        let inside = offset >= node.from && offset < node.to;
        (inside && node.is_clear(offset, clear)).then_some(offset)
    }

    /// The offset of a time from its node; `None` where a jump is closer than `clear`, so that
    /// it would matter on which side of it the time lies. The channels are then those of the
    /// node, see [`Near::channels`].
    pub fn place(&mut self, time: Double, clear: f64) -> Option<f64> {
        let node = self.exact.node_at(time, self.nodes.spacing);
        let offset = (time - node.time).to_f64();
        if !node.is_clear(offset, clear) {
            return None;
        }
        self.move_to(node);
        Some(offset)
    }

    /// The channels around the node of the last time that was placed: states, then outputs.
    pub fn channels(&self) -> &[Nearby] {
        &self.channels
    }

    fn move_to(&mut self, node: Node) {
        let (exact, spacing) = (self.exact, self.nodes.spacing);
        let follows = self
            .node
            .is_some_and(|last| last.segment == node.segment && last.number + 1.0 == node.number);
        if follows && self.since_anchor < NODES_PER_ANCHOR {
            exact.table.step(&mut self.flow, &self.nodes.step);
            self.since_anchor += 1;
        } else {
            self.flow = exact.flow_at(node.segment, node.time);
            self.since_anchor = 0;
        }
        let expansion = &mut self.expansion;
        exact
            .table
            .expand(&self.flow, self.nodes.terms, 0.5 * spacing, expansion);
        let rows = exact.system.channels.iter().zip(&self.weights);
        for (index, ((row, weights), channel)) in rows.zip(&mut self.channels).enumerate() {
            if index < exact.states() {
                expansion.entry(index, channel);
            } else {
                expansion.row(row, weights, channel);
            }
        }
        self.node = Some(node);
    }
}

impl Node {
    fn is_clear(&self, offset: f64, clear: f64) -> bool {
        offset - self.jumps.0 > clear && self.jumps.1 - offset > clear
    }
}

impl Exact {
    /// The nearest node, counted from the last jump.
    fn node_at(&self, time: Double, spacing: f64) -> Node {
        let segment = self.segment(time);
        let start = self.segment_start(segment);
        let number = ((time - start).to_f64() / spacing).round().max(0.0);
        let node = start + Double::from(number) * Double::from(spacing);
        let end = self.system.jumps.get(segment);
        let before = match segment {
            0 => f64::NEG_INFINITY,
            _ => (start - node).to_f64(),
        };
        let after = end.map_or(f64::INFINITY, |jump| (jump.time - node).to_f64());
        Node {
            segment,
            number,
            time: node,
            from: (-0.5 * spacing).max((start - node).to_f64()),
            to: (0.5 * spacing).min(after),
            jumps: (before, after),
        }
    }
}
