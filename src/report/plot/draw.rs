//! A plot as SVG: frame, axes, curves, dots, legend, and a text that says what it shows.
//!
//! Own SVG, since the plots need log axes that hide nothing, colours that follow the page
//! (light, dark, print), and text alternatives; no plotting library at hand has the three
//! together. Series differ by colour, dash and shape, so that none is lost in grey.

use std::fmt::Write;

use maud::{Markup, PreEscaped, html};

use super::axis::Axis;
use crate::report::html::outside;

/// Size of a plot in its own units; the page scales it.
const WIDTH: f64 = 440.0;
const HEIGHT: f64 = 290.0;
/// Places of the ends of the axes.
pub(super) const ACROSS: (f64, f64) = (62.0, 428.0);
pub(super) const UP: (f64, f64) = (236.0, 52.0);

/// How a series is drawn; the page has a style for each.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Look {
    /// The exact solution, `exp(z)`.
    Exact,
    /// What was written.
    Written,
    /// A limit, a claim.
    Limit,
    /// What digits resolve.
    Resolution,
    /// A fitted line.
    Fit,
    /// Further runs, told apart by dashes.
    Other(usize),
}

impl Look {
    fn class(self) -> String {
        match self {
            Look::Exact => "exact".to_owned(),
            Look::Written => "written".to_owned(),
            Look::Limit => "limit".to_owned(),
            Look::Resolution => "resolution".to_owned(),
            Look::Fit => "fit".to_owned(),
            Look::Other(number) => format!("other other{}", number % 4),
        }
    }
}

/// Points of one look under one name.
#[derive(Clone, Debug)]
pub(super) struct Series {
    pub look: Look,
    /// In the legend; empty to stay out of it.
    pub name: String,
    /// In numbers of the axes.
    pub points: Vec<(f64, f64)>,
    /// Dots in place of a line.
    pub dots: bool,
    /// Filled down to the bottom.
    pub area: bool,
}

impl Series {
    /// A line.
    pub fn line(look: Look, name: impl Into<String>, points: Vec<(f64, f64)>) -> Series {
        Series {
            look,
            name: name.into(),
            points,
            dots: false,
            area: false,
        }
    }

    /// Dots.
    pub fn dots(look: Look, name: impl Into<String>, points: Vec<(f64, f64)>) -> Series {
        Series {
            dots: true,
            ..Series::line(look, name, points)
        }
    }
}

/// A whole plot.
#[derive(Clone, Debug)]
pub(super) struct Plot {
    /// What it is of.
    pub title: String,
    /// What it shows, in a sentence for those who do not see it.
    pub finding: String,
    pub across: Axis,
    pub up: Axis,
    pub series: Vec<Series>,
}

impl Plot {
    /// As a figure with a caption.
    pub fn draw(&self) -> Markup {
        let (title, finding) = (outside(&self.title), outside(&self.finding));
        html! {
            figure {
                svg xmlns="http://www.w3.org/2000/svg" role="img" viewBox=(format!("0 0 {WIDTH} {HEIGHT}"))
                    aria-label=(format!("{title} {finding}")) {
                    (self.grid())
                    (self.labels())
                    @for series in &self.series { (self.one(series)) }
                    (self.legend())
                }
                figcaption { strong { (title) } " " (finding) }
            }
        }
    }

    fn grid(&self) -> Markup {
        let (left, right) = ACROSS;
        let (bottom, top) = UP;
        html! {
            @for (x, text) in self.across.marks() {
                path class="grid" d=(format!("M{x:.1} {bottom}V{top}")) {}
                text class="mark" x=(format!("{x:.1}")) y=(bottom + 15.0) text-anchor="middle" { (text) }
            }
            @for (y, text) in self.up.marks() {
                path class="grid" d=(format!("M{left} {y:.1}H{right}")) {}
                text class="mark" x=(left - 6.0) y=(format!("{:.1}", y + 3.5)) text-anchor="end" { (text) }
            }
            path class="frame" d=(format!("M{left} {top}V{bottom}H{right}")) {}
        }
    }

    fn labels(&self) -> Markup {
        let (left, right) = ACROSS;
        let (bottom, top) = UP;
        let middle = 0.5 * (bottom + top);
        html! {
            text class="axis" x=(0.5 * (left + right)) y=(HEIGHT - 16.0) text-anchor="middle" { (outside(&self.across.label)) }
            text class="axis" x="13" y=(middle) text-anchor="middle" transform=(format!("rotate(-90 13 {middle})")) {
                (outside(&self.up.label))
            }
        }
    }

    fn one(&self, series: &Series) -> Markup {
        let class = series.look.class();
        let (line, mut dots) = match series.dots {
            true => (String::new(), String::new()),
            false => self.line(&series.points),
        };
        if series.dots {
            dots = self.dots(&series.points);
        }
        html! {
            @if series.area {
                path class=(format!("area {class}")) d=(self.area(&series.points)) {}
            }
            @if !line.is_empty() { path class=(format!("line {class}")) d=(line) {} }
            @if !dots.is_empty() { path class=(format!("dots {class}")) d=(dots) {} }
        }
    }

    /// The place of a point, on the page or beyond.
    fn place(&self, (x, y): (f64, f64)) -> Option<(f64, f64)> {
        Some((self.across.place(x)?, self.up.place(y)?))
    }

    /// Lines with a gap where a point has no place, cut off at the frame; points that stand
    /// alone as dots.
    fn line(&self, points: &[(f64, f64)]) -> (String, String) {
        let (mut path, mut alone) = (String::new(), String::new());
        let pieces = points.split(|&point| self.place(point).is_none());
        for piece in pieces.filter(|piece| !piece.is_empty()) {
            let placed: Vec<(f64, f64)> = piece.iter().filter_map(|&p| self.place(p)).collect();
            if let [(x, y)] = placed[..] {
                if self.is_within((x, y)) {
                    // Nothing can fail that writes to a string.
                    let _ = write!(alone, "M{x:.1} {y:.1}h0");
                }
                continue;
            }
            let mut pen: Option<(f64, f64)> = None;
            for pair in placed.windows(2) {
                let Some((from, to)) = self.cut(pair[0], pair[1]) else {
                    pen = None;
                    continue;
                };
                if pen != Some(from) {
                    let _ = write!(path, "M{:.1} {:.1}", from.0, from.1);
                }
                let _ = write!(path, "L{:.1} {:.1}", to.0, to.1);
                pen = Some(to);
            }
        }
        (path, alone)
    }

    fn is_within(&self, (x, y): (f64, f64)) -> bool {
        let ((left, right), (top, bottom)) = (self.across.reach(), self.up.reach());
        (left - 0.01..=right + 0.01).contains(&x) && (top - 0.01..=bottom + 0.01).contains(&y)
    }

    /// The part of a stroke between top and bottom of the frame.
    fn cut(&self, from: (f64, f64), to: (f64, f64)) -> Option<((f64, f64), (f64, f64))> {
        let (top, bottom) = self.up.reach();
        let (mut start, mut end) = (0.0f64, 1.0f64);
        let rise = to.1 - from.1;
        for (edge, side) in [(top, 1.0), (bottom, -1.0)] {
            // Inside is where `side * (y - edge)` is not below zero.
            let (a, b) = (side * (from.1 - edge), side * (to.1 - edge));
            if a < 0.0 && b < 0.0 {
                return None;
            }
            if a < 0.0 {
                start = start.max((edge - from.1) / rise);
            } else if b < 0.0 {
                end = end.min((edge - from.1) / rise);
            }
        }
        let at = |share: f64| match share {
            0.0 => from,
            1.0 => to,
            _ => (from.0 + share * (to.0 - from.0), from.1 + share * rise),
        };
        (start <= end).then(|| (at(start), at(end)))
    }

    /// What lies between a line and the bottom.
    fn area(&self, points: &[(f64, f64)]) -> String {
        let placed: Vec<(f64, f64)> = points.iter().filter_map(|&p| self.place(p)).collect();
        let (Some(first), Some(last)) = (placed.first(), placed.last()) else {
            return String::new();
        };
        let (top, bottom) = self.up.reach();
        let mut path = format!("M{:.1} {bottom:.1}", first.0);
        for (x, y) in &placed {
            let _ = write!(path, "L{x:.1} {:.1}", y.clamp(top, bottom));
        }
        let _ = write!(path, "L{:.1} {bottom:.1}Z", last.0);
        path
    }

    /// Strokes of no length, which round ends turn into dots; one for each cell of the page
    /// that can be told from the next. What lies beyond top or bottom is drawn there.
    fn dots(&self, points: &[(f64, f64)]) -> String {
        let mut path = String::new();
        let mut seen = std::collections::BTreeSet::new();
        let (top, bottom) = self.up.reach();
        for (x, y) in points.iter().filter_map(|&point| self.place(point)) {
            let y = y.clamp(top, bottom);
            if seen.insert(((x / 1.5) as i64, (y / 1.5) as i64)) {
                let _ = write!(path, "M{x:.1} {y:.1}h0");
            }
        }
        path
    }

    fn legend(&self) -> Markup {
        let mut entries = Vec::new();
        let (mut x, mut y) = (ACROSS.0, 12.0);
        for series in self.series.iter().filter(|series| !series.name.is_empty()) {
            let name = shortened(&outside(&series.name));
            let width = 30.0 + 6.2 * name.chars().count() as f64;
            if x + width > WIDTH && x > ACROSS.0 {
                (x, y) = (ACROSS.0, y + 14.0);
            }
            entries.push((x, y, series, name));
            x += width;
        }
        html! {
            @for (x, y, series, name) in entries {
                @let sample = if series.dots { format!("M{} {y}h0", x + 9.0) } else { format!("M{x} {y}h18") };
                @let kind = if series.dots { "dots " } else { "line " };
                path class=(format!("{kind}{}", series.look.class())) d=(PreEscaped(sample)) {}
                text class="mark" x=(format!("{:.1}", x + 22.0)) y=(y + 3.5) { (name) }
            }
        }
    }
}

/// A name that fits into a legend.
fn shortened(name: &str) -> String {
    const MOST: usize = 24;
    if name.chars().count() <= MOST {
        return name.to_owned();
    }
    let kept: String = name.chars().take(MOST - 1).collect();
    format!("{kept}…")
}
