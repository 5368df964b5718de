//! Names and patterns of cases: `*` stands for any text.

use crate::fault::{Fault, nearest, quoted};

/// The names that a pattern matches, in their order.
///
/// # Errors
/// A pattern that matches none, with the nearest that would.
pub(super) fn select<'a>(pattern: &str, names: &[&'a str]) -> Result<Vec<&'a str>, Fault> {
    let found: Vec<&str> = (names.iter().copied())
        .filter(|name| matches(pattern.as_bytes(), name.as_bytes()))
        .collect();
    if !found.is_empty() {
        return Ok(found);
    }
    let shown = quoted(pattern);
    if !pattern.contains('*') {
        let fault = Fault::new(format!("there is no case {shown}"));
        return Err(match nearest(pattern, names.iter().copied()) {
            Some(near) => fault.help(format!(
                "did you mean `{near}`? `stepgauge cases` lists all"
            )),
            None => fault.help("`stepgauge cases` lists all"),
        });
    }
    let mut whole: Vec<String> = (names.iter())
        .filter_map(|name| Some(format!("{}/*", name.split_once('/')?.0)))
        .collect();
    whole.dedup();
    let fault = Fault::new(format!("no case matches {shown}"));
    Err(match nearest(pattern, whole.iter().map(String::as_str)) {
        Some(near) => fault.help(format!(
            "did you mean `{near}`? `stepgauge cases` lists all"
        )),
        None => fault.help(format!("whole fields are {}", whole.join(", "))),
    })
}

/// Whether a pattern matches a whole text; only the last star has to be tried again.
fn matches(pattern: &[u8], text: &[u8]) -> bool {
    let (mut at, mut seen) = (0, 0);
    let mut star: Option<(usize, usize)> = None;
    while seen < text.len() {
        if pattern.get(at) == Some(&b'*') {
            star = Some((at, seen));
            at += 1;
        } else if pattern.get(at) == Some(&text[seen]) {
            at += 1;
            seen += 1;
        } else if let Some((from, eaten)) = star {
            star = Some((from, eaten + 1));
            at = from + 1;
            seen = eaten + 1;
        } else {
            return false;
        }
    }
    pattern[at..].iter().all(|&byte| byte == b'*')
}

#[cfg(test)]
mod tests {
    use super::*;

    const NAMES: [&str; 3] = ["thermal/cold-room", "thermal/room", "winch/ramp"];

    #[test]
    fn stars_stand_for_any_text() {
        let found = |pattern: &str| {
            select(pattern, &NAMES)
                .map(|found| found.len())
                .unwrap_or(0)
        };
        for (pattern, count) in [
            ("thermal/*", 2),
            ("*", 3),
            ("*room", 2),
            ("*o*m*", 2),
            ("thermal/room", 1),
            ("thermal/room*", 1),
            ("thermal/roo", 0),
            ("room", 0),
            ("", 0),
            ("**ramp", 1),
            ("*ram", 0),
        ] {
            assert_eq!(found(pattern), count, "{pattern}");
        }
    }

    #[test]
    fn a_pattern_without_match_is_told_of_near_ones() {
        let told = |pattern: &str| select(pattern, &NAMES).unwrap_err().to_string();
        assert!(
            told("thermall/*")
                .contains("no case matches `thermall/*`\n  help: did you mean `thermal/*`?")
        );
        assert!(told("thermal/rom").contains("did you mean `thermal/room`?"));
        assert!(told("zzz*zzz").ends_with("whole fields are thermal/*, winch/*"));
    }
}
