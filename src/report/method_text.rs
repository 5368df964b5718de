//! Methods for reading: the catalogue as a table, one method in full.

use super::polynomial::{equation, number, polynomial};
use super::style::{Screen, WIDE, coloured};
use crate::number::Double;
use crate::outcome::{AliasFacts, Factor, FormFacts, MethodFacts, SourceFacts, Written};

/// All methods as a table.
pub fn method_list(methods: &[MethodFacts], screen: Screen) -> String {
    let wide = screen.width >= WIDE;
    let mut headings = vec![
        "method",
        ">order",
        "step",
        ">real",
        ">imaginary",
        "stable",
        "source",
    ];
    if wide {
        headings.push("other names");
    }
    let mut table = screen.table(&headings);
    for method in methods {
        let Some(form) = method.forms.first() else {
            continue;
        };
        let sources = method.sources.iter().map(in_short);
        let sources: Vec<String> = sources.take(if wide { 9 } else { 1 }).collect();
        let mut cells = vec![
            method.name.to_owned(),
            method.order.to_string(),
            kind(form).to_owned(),
            form.real
                .map_or("all".to_owned(), |limit| format!("-{limit:.3}")),
            form.imaginary
                .map_or("all".to_owned(), |limit| match limit {
                    0.0 => "0".to_owned(),
                    _ => format!("{limit:.3}"),
                }),
            region(form),
            sources.join("; "),
        ];
        if wide {
            let names = method.aliases.iter().map(|alias| alias.name);
            cells.push(names.collect::<Vec<_>>().join(", "));
        }
        table.add_row(cells.iter().map(|cell| screen.clean(cell)));
    }
    let lines = table.lines().map(|line| line.trim_end().to_owned() + "\n");
    let mut text: String = lines.collect();
    text += &format!(
        "\n{} methods; `stepgauge methods NAME` shows one in full\n\n",
        methods.len()
    );
    text += &screen.wrap(
        "Real, imaginary: how far from zero h lambda may lie on the negative real axis and on the \
         imaginary axis. A: stable wherever modes decay; L: besides, infinitely fast modes are \
         gone after one step; degrees: stable so far either side of the negative real axis. \
         Where codes differ under one name, the usual form counts.",
        0,
    );
    coloured(&(text + "\n"))
}

/// Names and year of the tag: `Hairer, Wanner 1996 IV.3`.
fn in_short(source: &SourceFacts) -> String {
    let capital = |name: &str| {
        let mut letters = name.chars();
        let first = letters.next().map(|c| c.to_ascii_uppercase());
        first.into_iter().chain(letters).collect::<String>()
    };
    let (names, year) = source.tag.rsplit_once('-').unwrap_or((source.tag, ""));
    let names: Vec<String> = names.split('-').map(capital).collect();
    let names = match &names[..] {
        [first, _, _, ..] => format!("{first} et al."),
        few => few.join(", "),
    };
    format!("{names} {year} {}", source.place)
        .trim_end()
        .to_owned()
}

fn kind(form: &FormFacts) -> &'static str {
    if form.implicit {
        "implicit"
    } else {
        "explicit"
    }
}

fn region(form: &FormFacts) -> String {
    match (form.l_stable, form.a_stable) {
        (true, _) => "A, L".to_owned(),
        (_, true) => "A".to_owned(),
        _ if form.real.is_none() => format!("{:.1} deg", form.angle),
        _ => String::new(),
    }
}

/// Methods that go by a name, each in full: coefficients, what a step does to a mode, how
/// far that is stable, where it is published.
pub fn method_text(name: &str, methods: &[MethodFacts], screen: Screen) -> String {
    let mut texts = Vec::new();
    if methods.len() > 1 {
        let names: Vec<&str> = methods.iter().map(|method| method.name).collect();
        let text = format!(
            "{name} is a name of {} methods: {}",
            names.len(),
            names.join("; ")
        );
        texts.push(screen.wrap(&text, 0) + "\n");
    }
    texts.extend(methods.iter().map(|method| one(method, screen)));
    coloured(&texts.join("\n"))
}

fn one(method: &MethodFacts, screen: Screen) -> String {
    let mut lines = vec![format!("{}: order {}", method.name, method.order)];
    let mut paragraph = |text: &str| {
        lines.push(String::new());
        lines.extend(screen.wrap(text, 0).lines().map(str::to_owned));
    };
    if !method.aliases.is_empty() {
        let names: Vec<String> = method.aliases.iter().map(alias).collect();
        paragraph(&format!("Other names: {}", names.join(", ")));
    }
    for source in &method.sources {
        let place = match source.place {
            "" => String::new(),
            place => format!(", {place}"),
        };
        paragraph(&format!("Source: {}{place} [{}]", source.text, source.tag));
    }
    let count = method.forms.len();
    for (index, form) in method.forms.iter().enumerate() {
        lines.push(String::new());
        if count > 1 {
            let usual = if index == 0 { ", the usual one" } else { "" };
            lines.push(format!("Form {} of {count}{usual}", index + 1));
            lines.push(String::new());
        }
        coefficients(&form.written, screen, &mut lines);
        lines.push(String::new());
        factor(form, method.order, screen, &mut lines);
        lines.push(String::new());
        stability(form, &mut lines);
    }
    let clean = lines
        .iter()
        .map(|line| screen.clean(line.trim_end()) + "\n");
    clean.collect()
}

fn alias(alias: &AliasFacts) -> String {
    let others: Vec<&str> = alias
        .shared_with
        .iter()
        .map(|&other| {
            // To say the name again would say nothing.
            let itself = other.eq_ignore_ascii_case(alias.name);
            if itself {
                "the method of that name"
            } else {
                other
            }
        })
        .collect();
    match others.len() {
        0 => alias.name.to_owned(),
        _ => format!("{} (also {})", alias.name, others.join(", ")),
    }
}

fn coefficients(written: &Written, screen: Screen, lines: &mut Vec<String>) {
    match written {
        Written::Tableau {
            nodes,
            matrix,
            weights,
        } => {
            lines.push("Coefficients: nodes, stages, weights".to_owned());
            lines.extend(tableau(nodes, matrix, weights, screen));
        }
        Written::LinearlyImplicit {
            nodes,
            gamma,
            alpha,
            shift,
            weights,
            slopes,
        } => {
            lines.push("Coefficients: nodes, alpha, weights b".to_owned());
            lines.extend(tableau(nodes, alpha, weights, screen));
            lines.push(format!("  gamma on the diagonal = {gamma}"));
            let below = shift.iter().enumerate();
            for (i, row) in below.filter(|(i, _)| *i > 0) {
                for (j, entry) in row.iter().enumerate() {
                    lines.push(format!("  gamma({}, {}) = {entry}", i + 1, j + 1));
                }
            }
            let rate = slopes.map_or("", |_| " + gamma_i h^2 df/dt");
            let sentence = format!(
                "  k_i = h f(t + node_i h, x + sum alpha_ij k_j) + h J sum gamma_ij k_j{rate}"
            );
            lines.push(sentence);
            match slopes {
                None => lines.push("  The rate of the inputs is left out.".to_owned()),
                Some(Some(part)) => lines.push(format!(
                    "  The rate of the inputs is a difference over {part} of the step."
                )),
                Some(None) => {}
            }
        }
        Written::Multistep { alpha, beta } => {
            lines.push("Coefficients: sum of a x = h times the sum of b f".to_owned());
            lines.extend(steps(["a", "b"], [alpha, beta]));
        }
        Written::Predicted {
            predictor,
            corrector,
        } => {
            lines.push("Coefficients: x at n + 1 = x at n plus h times a sum of f".to_owned());
            lines.extend(steps(["predictor", "corrector"], [predictor, corrector]));
            lines.push("  The corrector is used once; f is evaluated again after it.".to_owned());
        }
        Written::SemiImplicit => {
            lines.push("Coefficients: none".to_owned());
            lines.push(
                "  States are moved one after the other, each with the newest of the others."
                    .to_owned(),
            );
        }
        Written::Exponential { by_state } => {
            lines.push("Coefficients: none".to_owned());
            let how = if *by_state {
                "  Each state by the exponential of its own rate, all else held from the start of \
                 the step."
            } else {
                "  States by the matrix exponential, inputs held from the start of the step."
            };
            lines.push(how.to_owned());
        }
    }
}

/// Columns as wide as their widest entry; where the screen is too narrow for that, one
/// entry a line.
fn tableau(
    nodes: &[Double],
    matrix: &[Vec<&str>],
    weights: &[&str],
    screen: Screen,
) -> Vec<String> {
    let nodes: Vec<String> = nodes.iter().map(|&node| number(node)).collect();
    let rows = || matrix.iter().map(Vec::as_slice).chain([weights]);
    let widths: Vec<usize> = (0..weights.len())
        .map(|j| {
            let entries = rows().filter_map(|row| row.get(j));
            entries.map(|entry| entry.len()).max().unwrap_or(0)
        })
        .collect();
    let first = nodes.iter().map(String::len).max().unwrap_or(0);
    let whole = widths.iter().map(|width| width + 2).sum::<usize>();
    if first + whole + 4 > usize::from(screen.width) {
        let stages = nodes.iter().zip(matrix).enumerate();
        let stages = stages.flat_map(|(i, (node, row))| {
            let own = format!("  stage {}, node {node}", i + 1);
            [own]
                .into_iter()
                .chain(row.iter().map(|x| format!("    {x}")))
        });
        let weights = weights.iter().map(|x| format!("    {x}"));
        return stages
            .chain(["  weights".to_owned()])
            .chain(weights)
            .collect();
    }
    let line = |head: &str, row: &[&str]| {
        let entries = row.iter().zip(&widths);
        let entries: Vec<String> = entries.map(|(x, &width)| format!("{x:<width$}")).collect();
        format!("  {head:<first$} | {}", entries.join("  "))
    };
    let mut lines: Vec<String> = nodes
        .iter()
        .zip(matrix)
        .map(|(n, row)| line(n, row))
        .collect();
    lines.push(format!(
        "  {}-+{}",
        "-".repeat(first),
        "-".repeat(whole.saturating_sub(1))
    ));
    lines.push(line("", weights));
    lines
}

/// Two columns of coefficients, newest first; the shorter one ends at the same step.
fn steps(headings: [&str; 2], columns: [&[&str]; 2]) -> Vec<String> {
    let count = columns[0].len().max(columns[1].len());
    let width = columns[0]
        .iter()
        .map(|x| x.len())
        .chain([headings[0].len()]);
    let width = width.max().unwrap_or(0);
    let mut lines = vec![format!(
        "  {:<5}  {:<width$}  {}",
        "at", headings[0], headings[1]
    )];
    for back in 0..count {
        let at = match back {
            0 => "n + 1".to_owned(),
            1 => "n".to_owned(),
            _ => format!("n - {}", back - 1),
        };
        let entry = |column: &[&str]| {
            let index = column.len().checked_sub(back + 1);
            index.map_or("0".to_owned(), |index| column[index].to_owned())
        };
        let (left, right) = (entry(columns[0]), entry(columns[1]));
        lines.push(format!("  {at:<5}  {left:<width$}  {right}"));
    }
    lines
}

fn factor(form: &FormFacts, order: u8, screen: Screen, lines: &mut Vec<String>) {
    lines.push("A step multiplies a mode x' = lambda x by f, with z = h lambda".to_owned());
    let mut put = |text: &str| {
        let wrapped = screen.wrap(&format!("..{text}"), 4);
        // Blanks at the start are lost in wrapping.
        lines.extend(wrapped.replacen("..", "  ", 1).lines().map(str::to_owned));
    };
    match &form.factor {
        Factor::Quotient {
            numerator,
            denominator,
        } => {
            let (above, below) = (polynomial(numerator, "z"), polynomial(denominator, "z"));
            match below.as_str() {
                "1" => put(&format!("f = {above}")),
                _ if above == "1" => put(&format!("f = 1 / ({below})")),
                _ => put(&format!("f = ({above}) / ({below})")),
            }
        }
        Factor::Equation(terms) => put(&format!("{} = 0", equation(terms))),
        Factor::Oscillator => {
            put("f = 1 + z for a single state");
            put("f^2 - (2 - y^2) f + 1 = 0 for an oscillator, z = i y");
        }
        Factor::Exponential => put("f = exp(z): only inputs that are not held cause an error"),
    }
    if let Some(constant) = form.error_constant {
        let power = usize::from(order) + 1;
        let mut first = vec![Double::ZERO; power];
        first.push(constant);
        put(&format!("f - exp(z) = {} + ...", polynomial(&first, "z")));
    }
}

fn stability(form: &FormFacts, lines: &mut Vec<String>) {
    let yes = |holds: bool| if holds { "yes" } else { "no" };
    lines.push(format!("Stability of the {} step", kind(form)));
    lines.push(match form.real {
        None => "  negative real axis: all of it".to_owned(),
        Some(limit) => format!("  negative real axis: down to {}", digits(-limit)),
    });
    lines.push(match form.imaginary {
        None => "  imaginary axis: all of it".to_owned(),
        Some(0.0) => "  imaginary axis: nowhere beside zero".to_owned(),
        Some(limit) => format!("  imaginary axis: up to {}", digits(limit)),
    });
    if form.real.is_none() && !form.a_stable {
        lines.push(format!(
            "  sector: {} degrees either side of the negative real axis",
            digits(form.angle)
        ));
    }
    lines.push(format!("  A-stable: {}", yes(form.a_stable)));
    lines.push(format!("  L-stable: {}", yes(form.l_stable)));
}

/// Nine decimals at most: limits are known to more, angles come from sines.
fn digits(value: f64) -> String {
    let text = format!("{value:.9}");
    text.trim_end_matches('0').trim_end_matches('.').to_owned()
}
