//! A plot as SVG: frame, axes, curves, dots, legend, and a text that says what it shows.
//!
//! Own SVG, since the plots need log axes that hide nothing, colours that follow the page
//! (light, dark, print), and text alternatives; no plotting library at hand has the three
//! together. Series differ by colour, dash and shape, so that none is lost in grey.

use std::fmt::Write;

use maud::{Markup, PreEscaped, html};

use super::axis::Axis;

/// Size of a plot in its own units; the page scales it.
const WIDTH: f64 = 440.0;
const HEIGHT: f64 = 290.0;
/// Places of the ends of the axes.
pub(super) const ACROSS: (f64, f64) = (62.0, 428.0);
pub(super) const UP: (f64, f64) = (236.0, 40.0);

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
        html! {
            figure {
                svg xmlns="http://www.w3.org/2000/svg" role="img" viewBox=(format!("0 0 {WIDTH} {HEIGHT}"))
                    aria-label=(format!("{}. {}", self.title, self.finding)) {
                    (self.grid())
                    (self.labels())
                    @for series in &self.series { (self.one(series)) }
                    (self.legend())
                }
                figcaption { strong { (self.title) } " " (self.finding) }
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
            text class="axis" x=(0.5 * (left + right)) y=(HEIGHT - 16.0) text-anchor="middle" { (self.across.label) }
            text class="axis" x="13" y=(middle) text-anchor="middle" transform=(format!("rotate(-90 13 {middle})")) {
                (self.up.label)
            }
        }
    }

    fn one(&self, series: &Series) -> Markup {
        let path = if series.dots {
            self.dots(series)
        } else {
            self.line(series)
        };
        let kind = if series.dots { "dots " } else { "line " };
        html! {
            @if !path.is_empty() {
                path class=(format!("{kind}{}", series.look.class())) d=(path) {}
            }
        }
    }

    /// Lines with a gap where a point has no place.
    fn line(&self, series: &Series) -> String {
        let mut path = String::new();
        let mut pen_is_down = false;
        let mut last: Option<(f64, f64)> = None;
        for &(x, y) in &series.points {
            let (Some(x), Some(y)) = (self.across.place(x), self.up.place(y)) else {
                pen_is_down = false;
                continue;
            };
            let near = |(a, b): (f64, f64)| (a - x).abs() < 0.05 && (b - y).abs() < 0.05;
            if pen_is_down && last.is_some_and(near) {
                continue;
            }
            let pen = if pen_is_down { 'L' } else { 'M' };
            // Nothing can fail that writes to a string.
            let _ = write!(path, "{pen}{x:.1} {y:.1}");
            pen_is_down = true;
            last = Some((x, y));
        }
        path
    }

    /// Strokes of no length, which round ends turn into dots; one for each cell of the page
    /// that can be told from the next.
    fn dots(&self, series: &Series) -> String {
        let mut path = String::new();
        let mut seen = std::collections::BTreeSet::new();
        for &(x, y) in &series.points {
            let (Some(x), Some(y)) = (self.across.place(x), self.up.place(y)) else {
                continue;
            };
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
            let name = shortened(&series.name);
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
    const MOST: usize = 34;
    if name.chars().count() <= MOST {
        return name.to_owned();
    }
    let kept: String = name.chars().take(MOST - 1).collect();
    format!("{kept}…")
}
