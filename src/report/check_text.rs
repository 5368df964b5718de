//! The second route to an exact solution on the terminal.

use super::style::Screen;
use crate::case::Case;
use crate::number::short;

/// What a second route shows of one channel, in units in the last place of its values.
pub struct ChannelCheck {
    /// The largest difference.
    pub units: f64,
    /// When.
    pub at: f64,
    /// The largest difference from the closed form, where there is one.
    pub closed_form: Option<f64>,
}

/// One line for each channel of the case, and what they come to: whether all of so many times
/// agree.
pub fn check_text(
    case: &Case,
    channels: &[ChannelCheck],
    (times, agree): (usize, bool),
    screen: Screen,
) -> String {
    let at = format!(">at t, {}", case.time.unit);
    let mut table = screen.table(&["channel", ">quad-double, ulp", &at, ">closed form, ulp"]);
    for (channel, gap) in case.channels().iter().zip(channels) {
        let closed = gap.closed_form.map_or("none".to_owned(), ulps);
        table.add_row([
            screen.clean(channel.name),
            ulps(gap.units),
            short(gap.at),
            closed,
        ]);
    }
    let mut text = format!("{}: {}\n\n", case.name, screen.clean(&case.title));
    for line in table.lines() {
        text += line.trim_end();
        text.push('\n');
    }
    let conclusion = match agree {
        true => "no value is further from the second route than one unit in its last place",
        false => "the routes do NOT agree: do not rely on this case",
    };
    let line = format!("{times} times: {conclusion}.");
    text + &format!("\n{}\n", screen.wrap(&line, 0))
}

fn ulps(units: f64) -> String {
    format!("{units:.3}")
}
