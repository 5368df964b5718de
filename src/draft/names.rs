//! How the name of a column goes with that of a channel, and what it says of a unit.

use crate::submission::convert;

/// How alike a name in a header and that of a channel are.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub(super) enum Likeness {
    /// The header has the words of the channel among others.
    Words,
    /// The same letters and digits.
    Letters,
    /// The same but for capitals: what the audit finds without being told.
    Same,
}

/// Compares the bare name in a header with that of a channel.
pub(super) fn likeness(header: &str, channel: &str) -> Option<Likeness> {
    if header.eq_ignore_ascii_case(channel) {
        return Some(Likeness::Same);
    }
    let letters = |text: &str| words(text).concat();
    if !letters(header).is_empty() && letters(header) == letters(channel) {
        return Some(Likeness::Letters);
    }
    let (header, channel) = (words(header), words(channel));
    let among = |word: &String| header.contains(word);
    let close = (0..header.len()).any(|from| header[from..].starts_with(&channel));
    // Words that are apart from each other count where they are long enough to tell.
    let apart = channel.iter().all(|word| word.len() > 2 && among(word));
    (!channel.is_empty() && (close || apart)).then_some(Likeness::Words)
}

/// Runs of letters and digits, in lower case; `airTemp` has two.
fn words(text: &str) -> Vec<String> {
    let mut words: Vec<String> = Vec::new();
    let mut open = false;
    let mut last_is_small = false;
    for c in text.chars() {
        let begins = !open || c.is_uppercase() && last_is_small;
        open = c.is_alphanumeric();
        last_is_small = c.is_lowercase();
        if !open {
            continue;
        }
        if begins {
            words.push(String::new());
        }
        if let Some(word) = words.last_mut() {
            word.extend(c.to_lowercase());
        }
    }
    words
}

/// The unit that a name ends with, as in `v_c_mV`, where it converts to the channel's.
pub(super) fn unit_hint(header: &str, target: &str) -> Option<String> {
    let (name, last) = header.rsplit_once(['_', ' ', '.', '-'])?;
    let fits = !name.trim().is_empty() && convert(last, target).is_ok();
    fits.then(|| last.to_owned())
}

/// True for a name that is likely that of time stamps.
pub(super) fn is_like_time(name: &str) -> bool {
    let words = words(name);
    words.first().is_some_and(|first| first == "t")
        || words.iter().any(|word| {
            let whole = [
                "stamp", "clock", "seconds", "minutes", "hours", "sec", "days",
            ];
            word.contains("time") || whole.contains(&word.as_str())
        })
}

/// The unit of time that a name says.
pub(super) fn time_hint(name: &str) -> Option<String> {
    let whole = [
        ("seconds", "s"),
        ("minutes", "min"),
        ("hours", "h"),
        ("days", "d"),
    ];
    let lower = name.to_lowercase();
    let said = whole.iter().find(|(word, _)| lower.contains(word));
    match said {
        Some((_, unit)) => Some((*unit).to_owned()),
        None => unit_hint(name, "s"),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_are_alike_in_three_ways() {
        use Likeness::{Letters, Same, Words};
        for (header, channel, expected) in [
            ("air", "air", Some(Same)),
            ("V_C", "v_c", Some(Same)),
            ("v-c", "v_c", Some(Letters)),
            ("T_air", "air", Some(Words)),
            ("airTemp", "air", Some(Words)),
            ("room air, sensor 1", "air", Some(Words)),
            ("v_c_mV", "v_c", Some(Words)),
            ("c v", "v_c", None),
            ("fair", "air", None),
            ("", "air", None),
        ] {
            assert_eq!(likeness(header, channel), expected, "{header} {channel}");
        }
    }

    #[test]
    fn names_hint_at_units() {
        assert_eq!(unit_hint("v_c_mV", "V").as_deref(), Some("mV"));
        assert_eq!(unit_hint("v_c_mV", "A"), None);
        assert_eq!(unit_hint("mV", "V"), None);
        assert_eq!(time_hint("time_ms").as_deref(), Some("ms"));
        assert_eq!(time_hint("minutes since start").as_deref(), Some("min"));
        assert_eq!(time_hint("t"), None);
        assert!(is_like_time("sim time") && is_like_time("t_s"));
        assert!(!is_like_time("temperature") && !is_like_time("step"));
    }
}
