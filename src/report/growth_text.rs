//! The factors of the modes on the terminal, with as many digits as are known.

use super::style::Screen;
use crate::number::{measured, plain, short};
use crate::outcome::{Audited, Damping, GrowthOutcome, GrowthSummary, Outcome};

/// Up to so many submissions are shown this closely.
pub(super) const FEW: usize = 3;
/// Lines shown for one submission.
const MOST_LINES: usize = 12;
/// Decimals shown at most: of a real factor, of each part of another one.
const MOST_DECIMALS: [i32; 2] = [10, 6];

/// The section, where few submissions are audited; else nothing.
pub(super) fn growth_text(outcome: &Outcome, screen: Screen) -> String {
    if outcome.submissions.len() > FEW {
        return String::new();
    }
    let parts = outcome
        .submissions
        .iter()
        .filter_map(|s| of_submission(s, screen));
    let parts: Vec<String> = parts.collect();
    if parts.is_empty() {
        return String::new();
    }
    format!("\nGrowth per step:\n{}", parts.join(""))
}

fn of_submission(submission: &Audited, screen: Screen) -> Option<String> {
    let evidence = submission.evidence.as_ref()?;
    let summary = evidence.growth.as_ref()?;
    let runs = evidence.runs.iter();
    let rows: Vec<(&str, &GrowthOutcome)> = runs
        .flat_map(|run| run.growth.iter().map(|growth| (run.file.as_str(), growth)))
        .collect();
    if rows.is_empty() {
        return None;
    }
    let several = rows
        .iter()
        .any(|(_, growth)| growth.steps_per_row.unwrap_or(1) > 1);
    let mode = format!(">mode, 1/{}", submission.time_unit);
    let mut headings = vec!["run", mode.as_str(), ">z", ">factor", ">exp(z)"];
    if several {
        headings.push(">steps");
    }
    let mut table = screen.table(&headings);
    for (file, growth) in rows.iter().take(MOST_LINES) {
        let real = growth.factor.1 == 0.0 && growth.exact.1 == 0.0;
        let most = MOST_DECIMALS[usize::from(!real)];
        let mut cells = vec![
            screen.clean(file),
            complex(growth.eigenvalue, short),
            complex(growth.z, short),
            known(growth.factor, growth.doubt, most),
            known(growth.exact, growth.doubt, most),
        ];
        if several {
            let steps = growth.steps_per_row;
            cells.push(steps.map_or(String::new(), |steps| steps.to_string()));
        }
        table.add_row(cells);
    }
    let mut text = format!("  {}\n", screen.clean(&submission.name));
    for line in table.lines() {
        text += format!("  {line}").trim_end();
        text.push('\n');
    }
    let mut end = Vec::new();
    if rows.len() > MOST_LINES {
        let more = rows.len() - MOST_LINES;
        end.push(format!("{more} more; the JSON report has all"));
    }
    if several {
        end.push("z and factor are those from row to row, so many steps apart".to_owned());
    }
    end.extend(conclusion(summary));
    for line in end {
        let within = Screen {
            width: screen.width - 2,
            ..screen
        };
        text += &format!("  {}\n", within.wrap(&line, 4));
    }
    Some(text)
}

fn conclusion(summary: &GrowthSummary) -> Vec<String> {
    let mut lines = Vec::new();
    if let Some(count) = summary.coefficients {
        let order = count.saturating_sub(1);
        lines.push(format!(
            "order on linear problems: {order} (reproduces {count} coefficients of exp)"
        ));
    } else if summary.exact {
        lines.push(
            "order on linear problems: none to see, the factors are exp(z) to the digits"
                .to_owned(),
        );
    }
    // Slow modes show nothing of how a method damps.
    let strong = |damping: &Damping| damping.z.0.hypot(damping.z.1) >= 1.0;
    if let Some(damping) = summary.damping.filter(strong) {
        lines.push(format!(
            "damping at z = {}: {} (exp: {})",
            complex(damping.z, short),
            measured(damping.factor, damping.doubt),
            short(damping.exact)
        ));
    }
    lines
}

/// Real and imaginary part, the latter where there is one.
fn complex((re, im): (f64, f64), shown: impl Fn(f64) -> String) -> String {
    match (re == 0.0, im) {
        (_, 0.0) => shown(re),
        (true, _) => format!("{}i", shown(im)),
        (false, _) => {
            let sign = if im < 0.0 { '-' } else { '+' };
            format!("{} {sign} {}i", shown(re), shown(im.abs()))
        }
    }
}

/// A value with the decimals that its doubt leaves.
fn known(value: (f64, f64), doubt: f64, most: i32) -> String {
    // Half a unit of the last decimal is not less than the doubt.
    let decimals = -(2.0 * doubt).max(f64::MIN_POSITIVE).log10().ceil();
    let decimals = (decimals as i32).clamp(0, most) as usize;
    complex(value, |part| {
        let size = part.abs();
        if size >= 1e7 {
            let digits = (size.log10().floor() as usize + decimals).min(8);
            return format!("{part:.digits$e}");
        }
        let text = format!("{part:.decimals$}");
        let rounded: f64 = text.parse().unwrap_or(part);
        if rounded == 0.0 { plain(0.0) } else { text }
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn digits_as_far_as_they_are_known() {
        assert_eq!(known((0.123_456_789, 0.0), 4e-5, 10), "0.1235");
        assert_eq!(known((0.123_456_789, 0.0), 6e-5, 10), "0.123");
        assert_eq!(known((0.5, -0.25), 1e-9, 6), "0.500000 - 0.250000i");
        assert_eq!(known((1.2e-9, 0.0), 1e-5, 10), "0");
        assert_eq!(known((0.7, 0.0), 3.0, 10), "1");
        assert_eq!(complex((0.0, 1.5), short), "1.50i");
    }
}
