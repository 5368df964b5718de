//! From the shape of a case file to a [`Case`]: names, formulas and numbers are
//! checked one by one, and every complaint is kept with its place.

use std::ops::Range;

use super::schema::{CaseFile, InputEntry, Place, Quantity};
use super::{Case, Input, Limits, Output, Parameter, Replacements, Shape, State, Window};
use super::{MOST_INPUTS, MOST_NAMES, MOST_STATES};
use crate::fault::{Fault, in_plain_words, nearest, quoted};
use crate::formula::{Affine, Formula, Scalar, is_name, is_reserved};
use crate::number::Double;

/// Fewest rows of a run where a case does not say (common practice, no source).
const LEAST_ROWS: u64 = 5;
/// Complaints about one file; whoever mends these will see the next ones.
const MOST_FAULTS: usize = 100;

/// Collects complaints while the file is gone through.
struct Checker<'a> {
    text: &'a str,
    faults: Vec<Fault>,
    /// True where something was not looked at, since there are complaints enough.
    cut: bool,
    names: Vec<String>,
    parameters: Vec<Parameter>,
}

/// Reads a case; see [`Case::parse`].
pub(super) fn check(slug: &str, text: &str, replace: &Replacements) -> Result<Case, Vec<Fault>> {
    let file: CaseFile = toml::from_str(text).map_err(|error| {
        let offset = error.span().map_or(0, |span| span.start);
        vec![Fault::new(in_plain_words(error.message())).at_offset(text, offset)]
    })?;
    let mut checker = Checker {
        text,
        faults: Vec::new(),
        cut: false,
        names: Vec::new(),
        parameters: Vec::new(),
    };
    let case = checker.case(slug, file, replace);
    let mut faults = checker.faults;
    if faults.is_empty() {
        return Ok(case);
    }
    faults.sort_by_key(|fault| (fault.line, fault.column));
    if checker.cut {
        let text = format!("after {MOST_FAULTS} complaints the rest was not looked at");
        faults.push(Fault::new(text).help("mend these first, the next ones will show then"));
    }
    Err(faults)
}

impl Checker<'_> {
    fn case(&mut self, slug: &str, file: CaseFile, replace: &Replacements) -> Case {
        let name = &format!("{}/{slug}", file.field.get_ref());
        if !is_slug(file.field.get_ref()) {
            let text = format!(
                "field is {}, which is no folder name",
                quoted(file.field.get_ref())
            );
            let fault = Fault::new(text).help("use a-z, 0-9 and - only");
            self.faults
                .push(fault.at_offset(self.text, file.field.span().start));
        }
        for (what, value) in [("title", &file.title), ("source", &file.source)] {
            if value.get_ref().trim().is_empty() {
                self.complain(format!("`{what}` is empty"), &value.span());
            }
        }
        self.read_parameters(&file, replace);
        let time = self.window(&file);
        let counts = [
            (file.states.len(), MOST_STATES, "states"),
            (file.inputs.len(), MOST_INPUTS, "inputs"),
            (file.outputs.len(), MOST_NAMES, "outputs"),
        ];
        for (count, most, what) in counts {
            if count > most {
                self.faults.push(Fault::new(format!(
                    "{count} {what}, at most {most} are allowed"
                )));
                return self.empty(name, &file, time);
            }
        }
        if file.states.is_empty() {
            self.faults
                .push(Fault::new("a case needs at least one state"));
        }
        let names: Vec<&Place<String>> = (file.states.iter().map(|s| &s.get_ref().name))
            .chain(file.inputs.iter().map(|i| &i.get_ref().name))
            .chain(file.outputs.iter().map(|o| &o.get_ref().name))
            .collect();
        for name in names {
            self.claim(name.get_ref(), &name.span());
        }
        let mut case = self.empty(name, &file, time);
        case.inputs = file
            .inputs
            .iter()
            .filter_map(|input| self.input(input))
            .collect();
        self.rates(&file, &mut case);
        self.closed_form(&file, &mut case);
        case.replaced = replace.keys().cloned().collect();
        case
    }

    fn empty(&self, name: &str, file: &CaseFile, time: Window) -> Case {
        let limits = file.limits.get_ref();
        Case {
            name: name.to_owned(),
            title: file.title.get_ref().clone(),
            field: file.field.get_ref().clone(),
            about: file.about.clone(),
            source: file.source.get_ref().clone(),
            hard_for: file.hard_for.clone(),
            parameters: self.parameters.clone(),
            time,
            states: Vec::new(),
            inputs: Vec::new(),
            outputs: Vec::new(),
            limits: Limits {
                absolute: limits.absolute,
                relative: limits.relative,
            },
            closed_form: None,
            replaced: Vec::new(),
        }
    }

    /// Every place is looked up from the beginning of the text: a list of mistakes as long as
    /// the file would take for ever.
    fn is_full(&mut self) -> bool {
        let full = self.faults.len() >= MOST_FAULTS;
        self.cut |= full;
        full
    }

    fn complain(&mut self, text: impl Into<String>, span: &Range<usize>) {
        if self.is_full() {
            return;
        }
        self.faults
            .push(Fault::new(text).at_offset(self.text, span.start));
    }

    /// Takes a name into use, or says why it cannot be.
    fn claim(&mut self, name: &str, span: &Range<usize>) {
        if !is_name(name) {
            let text = format!("{} is not a name", quoted(name));
            let help = "names begin with a letter and are made of a-z, A-Z, 0-9 and _";
            self.faults
                .push(Fault::new(text).help(help).at_offset(self.text, span.start));
        } else if is_reserved(name) {
            self.complain(
                format!("`{name}` has a meaning of its own in formulas"),
                span,
            );
        } else if self.names.iter().any(|known| known == name) {
            self.complain(format!("`{name}` is already in use"), span);
        } else {
            self.names.push(name.to_owned());
        }
    }

    fn read_parameters(&mut self, file: &CaseFile, replace: &Replacements) {
        let mut entries: Vec<_> = file.parameters.iter().collect();
        // A table comes sorted by name; a parameter may use those before it.
        entries.sort_by_key(|(name, _)| name.span().start);
        if entries.len() > MOST_NAMES {
            self.faults.push(Fault::new(format!(
                "at most {MOST_NAMES} parameters are allowed"
            )));
            return;
        }
        for (name, entry) in entries {
            self.claim(name.get_ref(), &name.span());
            let value = self.number(&entry.get_ref().value);
            let value = replace
                .get(name.get_ref())
                .map_or(value, |&value| Double::from(value));
            self.parameters.push(Parameter {
                name: name.get_ref().clone(),
                value,
                unit: entry.get_ref().unit.clone(),
            });
        }
        for name in replace.keys() {
            if !self
                .parameters
                .iter()
                .any(|parameter| parameter.name == *name)
            {
                let fault = Fault::new(format!("the case has no parameter {}", quoted(name)));
                let known = self.parameters.iter().map(|p| p.name.as_str());
                let help = nearest(name, known).map(|near| format!("did you mean `{near}`?"));
                self.faults.push(Fault { help, ..fault });
            }
        }
    }

    fn window(&mut self, file: &CaseFile) -> Window {
        let entry = file.time.get_ref();
        let (from, to) = (self.number(&entry.from), self.number(&entry.to));
        if to <= from {
            self.complain("`to` must come after `from`", &entry.to.span());
        }
        let limits = file.limits.get_ref();
        for limit in [limits.absolute, limits.relative] {
            if !(limit >= 0.0 && limit.is_finite()) {
                self.complain(
                    "limits must be finite and not below zero",
                    &file.limits.span(),
                );
            }
        }
        // Two rows would be the start and the end alone.
        let least_rows = entry.least_rows.unwrap_or(LEAST_ROWS).max(2);
        Window {
            unit: entry.unit.clone(),
            from,
            to,
            least_rows,
        }
    }

    /// Names and values that a formula of numbers may use.
    fn parse(&mut self, text: &str, span: &Range<usize>, extra: &[&str]) -> Option<Formula> {
        if self.is_full() {
            return None;
        }
        let known = self.parameters.iter().map(|p| p.name.as_str());
        let names: Vec<&str> = known.chain(extra.iter().copied()).collect();
        let find = |name: &str| names.iter().position(|known| *known == name);
        match Formula::parse_known(text, &find, &names) {
            Ok(formula) => Some(formula),
            Err(fault) => {
                let column = fault.column.unwrap_or(1) as usize - 1;
                let skipped: usize = text.chars().take(column).map(char::len_utf8).sum();
                let offset = self.formula_offset(text, span, skipped);
                self.faults.push(fault.at_offset(self.text, offset));
                None
            }
        }
    }

    /// Where in the file a byte of a formula stands; the start of the string where
    /// escapes make the two differ.
    fn formula_offset(&self, formula: &str, span: &Range<usize>, offset: usize) -> usize {
        let raw = self.text.get(span.clone()).unwrap_or("");
        raw.find(formula)
            .map_or(span.start, |start| span.start + start + offset)
    }

    /// A number of the file, directly or from a formula of parameters.
    fn number(&mut self, quantity: &Place<Quantity>) -> Double {
        let span = quantity.span();
        let value = match quantity.get_ref() {
            Quantity::Number(value) => Double::from(*value),
            Quantity::Formula(text) => {
                let values: Vec<Double> = self.parameters.iter().map(|p| p.value).collect();
                match self
                    .parse(text, &span, &[])
                    .map(|formula| formula.evaluate(&values))
                {
                    Some(Ok(value)) => value,
                    _ => return Double::ZERO,
                }
            }
        };
        if !value.is_finite() || value.to_f64().abs() > 1e290 {
            self.complain("this is not a finite number", &span);
            return Double::ZERO;
        }
        value
    }

    /// A formula of states and inputs, refused where it is not affine.
    fn affine(&mut self, quantity: &Place<Quantity>, names: &[&str]) -> (Affine, String) {
        let span = quantity.span();
        let nothing = Affine::number(Double::ZERO);
        let text = match quantity.get_ref() {
            Quantity::Number(value) => {
                return (Affine::number(Double::from(*value)), value.to_string());
            }
            Quantity::Formula(text) => text.clone(),
        };
        let Some(formula) = self.parse(&text, &span, names) else {
            return (nothing, text);
        };
        let values: Vec<Affine> = (self.parameters.iter().map(|p| Affine::number(p.value)))
            .chain((0..names.len()).map(|index| Affine::quantity(index, names.len())))
            .collect();
        match formula.evaluate(&values) {
            Ok(mut affine) => {
                affine.coefficients.resize(names.len(), Double::ZERO);
                let finite = |x: &Double| x.is_finite() && x.to_f64().abs() < 1e290;
                if !(finite(&affine.constant) && affine.coefficients.iter().all(finite)) {
                    self.complain("a coefficient of this formula is not finite", &span);
                }
                (affine, text)
            }
            Err((_, (start, length))) => {
                let offset = self.formula_offset(&text, &span, start);
                let operation = text.get(start..start + length).unwrap_or("");
                let what = format!("`{operation}` makes this not linear in states and inputs");
                let fault = Fault::new(what).help("only linear models have a case");
                self.faults.push(fault.at_offset(self.text, offset));
                (nothing, text)
            }
        }
    }

    fn rates(&mut self, file: &CaseFile, case: &mut Case) {
        let states = file
            .states
            .iter()
            .map(|s| s.get_ref().name.get_ref().as_str());
        let inputs = file
            .inputs
            .iter()
            .map(|i| i.get_ref().name.get_ref().as_str());
        let names: Vec<&str> = states.chain(inputs).collect();
        for entry in &file.states {
            let state = entry.get_ref();
            let start = self.number(&state.start);
            let (rate, rate_text) = self.affine(&state.rate, &names);
            let exact_text = state.exact.as_ref().map(|exact| match exact.get_ref() {
                Quantity::Number(value) => value.to_string(),
                Quantity::Formula(text) => text.clone(),
            });
            let (name, unit) = (state.name.get_ref().clone(), state.unit.clone());
            case.states.push(State {
                name,
                unit,
                start,
                rate,
                rate_text,
                exact_text,
            });
        }
        for entry in &file.outputs {
            let output = entry.get_ref();
            let (value, value_text) = self.affine(&output.value, &names);
            let (name, unit) = (output.name.get_ref().clone(), output.unit.clone());
            case.outputs.push(Output {
                name,
                unit,
                value,
                value_text,
            });
        }
    }

    fn closed_form(&mut self, file: &CaseFile, case: &mut Case) {
        let stated: Vec<_> = file
            .states
            .iter()
            .map(|s| s.get_ref().exact.as_ref())
            .collect();
        if stated.iter().all(Option::is_none) {
            return;
        }
        let mut formulas = Vec::new();
        for (exact, state) in stated.iter().zip(&file.states) {
            let Some(exact) = exact else {
                let name = quoted(state.get_ref().name.get_ref());
                let text = format!("state {name} has no `exact`, though others have");
                self.complain(text, &state.span());
                continue;
            };
            let text = match exact.get_ref() {
                Quantity::Number(value) => format!("{value:e}"),
                Quantity::Formula(text) => text.clone(),
            };
            formulas.extend(self.parse(&text, &exact.span(), &["t"]));
        }
        case.closed_form = Some(formulas);
    }

    fn input(&mut self, entry: &Place<InputEntry>) -> Option<Input> {
        let input = entry.get_ref();
        let mut keys = Keys {
            checker: self,
            entry,
            used: Vec::new(),
        };
        let shape = keys.shape()?;
        keys.refuse_the_rest();
        if let Some(complaint) = shape.complaint() {
            self.complain(complaint, &input.shape.span());
        }
        Some(Input {
            name: input.name.get_ref().clone(),
            unit: input.unit.clone(),
            shape,
        })
    }
}

/// Takes the keys of one input one after another, so that what is left over can be
/// refused by name.
struct Keys<'c, 'a> {
    checker: &'c mut Checker<'a>,
    entry: &'c Place<InputEntry>,
    used: Vec<&'static str>,
}

impl Keys<'_, '_> {
    fn shape(&mut self) -> Option<Shape> {
        let place = &self.entry.get_ref().shape;
        Some(match place.get_ref().as_str() {
            "constant" => Shape::Constant {
                value: self.one("value"),
            },
            "step" => Shape::Step {
                height: self.one("height"),
                at: self.one("at"),
            },
            "ramp" => Shape::Ramp {
                slope: self.one("slope"),
                from: self.one("from"),
            },
            "pulse" => Shape::Pulse {
                height: self.one("height"),
                from: self.one("from"),
                width: self.one("width"),
            },
            "pulse-train" => Shape::PulseTrain {
                height: self.one("height"),
                from: self.one("from"),
                width: self.one("width"),
                period: self.one("period"),
                count: self.count(),
            },
            "sine" => Shape::Sine {
                amplitude: self.one("amplitude"),
                angular_frequency: self.angular_frequency(),
                phase: self.maybe("phase").unwrap_or(Double::ZERO),
            },
            "exponential" => Shape::Exponential {
                scale: self.one("scale"),
                rate: self.one("rate"),
            },
            "polynomial" => Shape::Polynomial {
                coefficients: self.list("coefficients"),
            },
            "held-samples" => Shape::HeldSamples {
                times: self.list("times"),
                values: self.list("values"),
            },
            "linear-samples" => Shape::LinearSamples {
                times: self.list("times"),
                values: self.list("values"),
            },
            other => {
                let fault = Fault::new(format!("{} is not a shape of input", quoted(other)));
                let help = match nearest(other, Shape::NAMES.into_iter()) {
                    Some(near) => format!("did you mean `{near}`?"),
                    None => format!("the shapes are {}", Shape::NAMES.join(", ")),
                };
                let fault = fault
                    .help(help)
                    .at_offset(self.checker.text, place.span().start);
                self.checker.faults.push(fault);
                return None;
            }
        })
    }

    fn single(&self, key: &str) -> Option<&Place<Quantity>> {
        let input = self.entry.get_ref();
        match key {
            "value" => &input.value,
            "height" => &input.height,
            "at" => &input.at,
            "slope" => &input.slope,
            "from" => &input.from,
            "width" => &input.width,
            "period" => &input.period,
            "count" => &input.count,
            "amplitude" => &input.amplitude,
            "frequency" => &input.frequency,
            "angular_frequency" => &input.angular_frequency,
            "phase" => &input.phase,
            "scale" => &input.scale,
            "rate" => &input.rate,
            _ => &None,
        }
        .as_ref()
    }

    fn many(&self, key: &str) -> Option<&Place<Vec<Place<Quantity>>>> {
        let input = self.entry.get_ref();
        match key {
            "coefficients" => &input.coefficients,
            "times" => &input.times,
            "values" => &input.values,
            _ => &None,
        }
        .as_ref()
    }

    fn maybe(&mut self, key: &'static str) -> Option<Double> {
        self.used.push(key);
        let quantity = self.single(key)?.clone();
        Some(self.checker.number(&quantity))
    }

    fn one(&mut self, key: &'static str) -> Double {
        self.maybe(key).unwrap_or_else(|| self.missing(key))
    }

    fn list(&mut self, key: &'static str) -> Vec<Double> {
        self.used.push(key);
        let Some(list) = self.many(key).cloned() else {
            self.missing(key);
            return Vec::new();
        };
        list.get_ref()
            .iter()
            .map(|quantity| self.checker.number(quantity))
            .collect()
    }

    fn missing(&mut self, key: &str) -> Double {
        let shape = &self.entry.get_ref().shape;
        let text = format!("an input of shape `{}` needs `{key}`", shape.get_ref());
        self.checker.complain(text, &shape.span());
        Double::ZERO
    }

    fn count(&mut self) -> Option<u64> {
        let count = self.maybe("count")?.to_f64();
        if count.fract() == 0.0 && (1.0..=1e15).contains(&count) {
            return Some(count as u64);
        }
        let span = self.single("count").map_or(0..0, Place::span);
        self.checker
            .complain("`count` must be a whole number from 1 on", &span);
        None
    }

    fn angular_frequency(&mut self) -> Double {
        match (self.maybe("frequency"), self.maybe("angular_frequency")) {
            (Some(_), Some(_)) => {
                let span = self.entry.get_ref().shape.span();
                let text = "a sine has either `frequency` or `angular_frequency`, not both";
                self.checker.complain(text, &span);
                Double::ZERO
            }
            (Some(cycles), None) => cycles * Double::PI.scale(2.0),
            (None, Some(angular)) => angular,
            (None, None) => self.missing("frequency"),
        }
    }

    fn refuse_the_rest(&mut self) {
        const SINGLE: [&str; 14] = [
            "value",
            "height",
            "at",
            "slope",
            "from",
            "width",
            "period",
            "count",
            "amplitude",
            "frequency",
            "angular_frequency",
            "phase",
            "scale",
            "rate",
        ];
        const MANY: [&str; 3] = ["coefficients", "times", "values"];
        let shape = self.entry.get_ref().shape.get_ref().clone();
        let single = SINGLE
            .iter()
            .map(|&key| (key, self.single(key).map(Place::span)));
        let many = MANY
            .iter()
            .map(|&key| (key, self.many(key).map(Place::span)));
        let all: Vec<_> = single.chain(many).collect();
        for (key, span) in all {
            if let Some(span) = span.filter(|_| !self.used.contains(&key)) {
                let text = format!("an input of shape `{shape}` has no `{key}`");
                self.checker.complain(text, &span);
            }
        }
    }
}

/// Lower-case letters, digits and hyphens.
fn is_slug(text: &str) -> bool {
    let known = |c: char| c.is_ascii_lowercase() || c.is_ascii_digit() || c == '-';
    !text.is_empty() && text.chars().all(known)
}

#[cfg(test)]
mod tests;
