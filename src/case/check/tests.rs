use super::*;

const GOOD: &str = r#"
title = "Lag"
field = "trial"
about = "One state."
source = "ours: for the tests"
hard_for = ["nothing"]

[parameters]
tau = { value = 2.0, unit = "s" }
k = { value = "1/tau", unit = "1/s" }

[time]
unit = "s"
from = 0
to = "5*tau"

[[states]]
name = "x"
unit = "V"
start = "2*k"
rate = "k*(u - x) + 3"
exact = "exp(-t)"

[[inputs]]
name = "u"
unit = "V"
shape = "step"
height = "tau"
at = 1

[[outputs]]
name = "y"
unit = "V"
value = "2*x - u + 1"

[limits]
absolute = 1e-3
relative = 0
"#;

fn faults(from: &str, to: &str) -> String {
    assert!(GOOD.contains(from), "{from}");
    let text = GOOD.replacen(from, to, 1);
    let faults = check("lag", &text, &Replacements::new()).unwrap_err();
    faults
        .iter()
        .map(ToString::to_string)
        .collect::<Vec<_>>()
        .join("\n")
}

#[test]
fn a_good_case_has_its_numbers() {
    let case = check("lag", GOOD, &Replacements::new()).unwrap();
    assert_eq!(case.name, "trial/lag");
    assert_eq!(case.time.to.to_f64(), 10.0);
    let state = &case.states[0];
    assert_eq!(state.start.to_f64(), 1.0);
    assert_eq!(state.rate.constant.to_f64(), 3.0);
    let coefficients: Vec<f64> = state.rate.coefficients.iter().map(|c| c.to_f64()).collect();
    assert_eq!(coefficients, [-0.5, 0.5]);
    assert_eq!(case.outputs[0].value.coefficients[1].to_f64(), -1.0);
    assert!(case.closed_form.is_some());
}

#[test]
fn parameters_can_be_replaced_and_later_ones_follow() {
    let replace = Replacements::from([("tau".to_owned(), 4.0)]);
    let case = check("lag", GOOD, &replace).unwrap();
    assert_eq!(case.time.to.to_f64(), 20.0);
    assert_eq!(case.states[0].rate.coefficients[0].to_f64(), -0.25);
    let replace = Replacements::from([("tua".to_owned(), 4.0)]);
    let fault = check("lag", GOOD, &replace).unwrap_err().remove(0);
    assert_eq!(
        fault.to_string(),
        "the case has no parameter `tua`\n  help: did you mean `tau`?"
    );
}

#[test]
fn complaints_have_their_place() {
    for (from, to, expected) in [
        (
            "k*(u - x) + 3",
            "k*(u - x) + x*u",
            "21:22: `*` makes this not linear in states and inputs",
        ),
        ("k*(u - x) + 3", "k*(u - q) + 3", "21:16: unknown name `q`"),
        (
            "k*(u - x) + 3",
            "t*x",
            "21:9: unknown name `t`\n  help: time enters a rate through the inputs",
        ),
        (
            "\"exp(-t)\"",
            "\"exp(-t\"",
            "22:10: this bracket is not closed",
        ),
        ("\"1/tau\"", "\"1/k\"", "10:18: unknown name `k`"),
        (
            "\"1/tau\"",
            "\"1/(tau-2)\"",
            "10:15: this is not a finite number",
        ),
        (
            "value = 2.0",
            "value = nan",
            "9:17: this is not a finite number",
        ),
        (
            "to = \"5*tau\"",
            "to = 0",
            "15:6: `to` must come after `from`",
        ),
        (
            "name = \"u\"",
            "name = \"x\"",
            "25:8: `x` is already in use",
        ),
        (
            "name = \"u\"",
            "name = \"pi\"",
            "25:8: `pi` has a meaning of its own in formulas",
        ),
        (
            "name = \"u\"",
            "name = \"u v\"",
            "25:8: `u v` is not a name",
        ),
        (
            "shape = \"step\"",
            "shape = \"stop\"",
            "27:9: `stop` is not a shape of input\n  help: did you mean `step`?",
        ),
        (
            "at = 1",
            "from = 1",
            "27:9: an input of shape `step` needs `at`",
        ),
        (
            "at = 1",
            "at = 1\nwidth = 2",
            "30:9: an input of shape `step` has no `width`",
        ),
        (
            "absolute = 1e-3",
            "absolute = -1",
            "36:1: limits must be finite and not below zero",
        ),
        (
            "title = \"Lag\"",
            "titel = \"Lag\"",
            "2:1: unknown field `titel`",
        ),
        (
            "field = \"trial\"",
            "field = \"../x\"",
            "3:9: field is `../x`, which is no folder name",
        ),
        (
            "start = \"2*k\"",
            "start = true",
            "20:9: invalid type: boolean",
        ),
    ] {
        let found = faults(from, to);
        assert!(found.contains(expected), "{from} -> {to}:\n{found}");
    }
}

#[test]
fn all_complaints_are_shown_in_order() {
    let text = GOOD.replace("5*tau", "5*tao").replace("2*k", "2*kk");
    let faults = check("lag", &text, &Replacements::new()).unwrap_err();
    let lines: Vec<_> = faults.iter().map(|fault| fault.line).collect();
    assert!(faults.len() >= 2 && lines.is_sorted(), "{faults:?}");
}

/// Whoever sees a list that ends has to know that it is not the end.
#[test]
fn a_list_of_complaints_says_where_it_ends() {
    let complaints = |count: usize| {
        let parameters = (0..count).map(|k| format!("p{k} = {{ value = nan, unit = \"\" }}\n"));
        let all = format!("[parameters]\n{}", parameters.collect::<String>());
        let text = faults("[parameters]\n", &all);
        let ended = text.ends_with(
            "after 100 complaints the rest was not looked at\n  help: mend these first, the next \
             ones will show then",
        );
        (text.matches("this is not a finite number").count(), ended)
    };
    assert_eq!(complaints(99), (99, false));
    // The formulas after the parameters were not looked at.
    assert_eq!(complaints(100), (100, true));
    assert_eq!(complaints(101), (100, true));
    // With nothing left to look at a list of a hundred is whole.
    let last = "value = \"2*x - u + 1\"";
    let wrong = |k: usize| format!("[[outputs]]\nname = \"y{k}\"\nunit = \"V\"\nvalue = \"x*u\"\n");
    let open = GOOD.replace("exact = \"exp(-t)\"\n", "");
    let outputs = |count: usize| {
        let more: String = (1..count).map(wrong).collect();
        let text = open.replace(last, &format!("value = \"x*u\"\n{more}"));
        let faults = check("lag", &text, &Replacements::new()).unwrap_err();
        let told = |what: &str| faults.iter().filter(|one| one.text.contains(what)).count();
        (told("not linear"), told("after 100"))
    };
    assert_eq!(outputs(99), (99, 0));
    assert_eq!(outputs(100), (100, 0));
    assert_eq!(outputs(101), (100, 1));
}
