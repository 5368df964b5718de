//! Likely causes for the runs of a submission that does not pass.

use super::Model;
use super::evidence::{RunFound, ask_at_steps, claimed_methods};
use super::run::RunCompared;
use crate::case::Library;
use crate::explain::{Cause, Kind, Parameters, Trouble, causes};
use crate::judge::{Answer, Support, Verdict};
use crate::method::{Linear, Method};
use crate::outcome::{Audited, CauseOutcome};
use crate::submission::{Role, Submission};

/// Runs of one submission that are looked into.
const MOST_RUNS: usize = 2;
/// Text of a case that may be read again to ask which of its parameters is off by a factor:
/// every case of the library, but not hundreds of parameters of a long file.
const MOST_PARSED_BYTES: usize = 60_000_000;
/// How often one parameter is changed: some 70 factors, and some ten ways to make the rows.
const TIMES_CHANGED: usize = 700;

/// Looks for causes where limits are broken or claims contradicted, and takes a
/// contradiction back where the claimed method explains all that a fault leaves.
pub(super) fn look(
    model: &Model,
    library: &Library,
    submission: &Submission,
    runs: &[RunCompared],
    found: &mut [RunFound],
    audited: &mut Audited,
) {
    let methods = claimed_methods(submission);
    let channels: Vec<(String, String)> = model
        .case
        .channels()
        .iter()
        .map(|channel| (channel.name.to_owned(), channel.unit.to_owned()))
        .collect();
    let inputs: Vec<String> = model
        .case
        .inputs
        .iter()
        .map(|input| input.name.clone())
        .collect();
    let given = &model.case.parameters;
    let scaled = |place: usize, factor: f64| {
        let mut replaced = submission.parameters.clone();
        let parameter = &given[place];
        let value = parameter.value.to_f64() * factor;
        replaced.insert(parameter.name.clone(), value);
        let case = library.load(submission.case.as_deref()?, &replaced).ok()?;
        Some(Linear::new(&case))
    };
    let name = submission.case.as_deref().unwrap_or_default();
    let cost = TIMES_CHANGED * library.text_bytes(name).max(1);
    let parameters = Parameters {
        names: given
            .iter()
            .take(MOST_PARSED_BYTES / cost)
            .map(|parameter| parameter.name.clone())
            .collect(),
        scaled: &scaled,
    };
    let mut looked = 0;
    let mut mended_by: Option<String> = None;
    let mut between_steps: Option<u64> = None;
    // The finest run decides on the order; results decide on limits.
    let mut order: Vec<usize> = (0..runs.len()).collect();
    order.sort_by_key(|&index| runs[index].outcome.role != Role::Result);
    for index in order {
        let (run, found) = (&runs[index], &mut found[index]);
        let broken = |verdict: Verdict| {
            run.outcome
                .channels
                .iter()
                .any(|channel| channel.verdict == verdict)
        };
        let result = run.outcome.role == Role::Result;
        let contradicted = found
            .answer
            .as_ref()
            .is_some_and(|a| a.support == Support::Contradicts);
        let low_order = audited.order_verdict == Some(Verdict::Fail);
        if !(contradicted || result && (broken(Verdict::Fail) || low_order)) {
            continue;
        }
        if looked >= MOST_RUNS {
            // The runs of a ladder share their fault.
            if let Some(count) = between_steps
                && let Some(at_steps) = ask_at_steps(model, submission, &methods, run, count)
            {
                found.answer = Some(at_steps);
            } else if let (Some(text), Some(answer)) = (&mended_by, &mut found.answer) {
                take_back(answer, text.clone());
            }
            continue;
        }
        looked += 1;
        let step = run.outcome.setting.step();
        let trouble = Trouble {
            linear: &model.linear,
            record: &run.record,
            evidence: &found.evidence,
            answer: found.answer.as_ref(),
            methods: &methods,
            step,
            channels: &channels,
            inputs: &inputs,
            parameters: &parameters,
            time_unit: &model.case.time.unit,
        };
        let causes = causes(&trouble);
        if let Some(cause) = causes.iter().find(|c| c.kind == Kind::InterpolatedRows)
            && let (Some(step), Some((spacing, _))) = (cause.number, run.record.spacing)
            && let count = (step / spacing).round() as u64
            && let Some(at_steps) = ask_at_steps(model, submission, &methods, run, count)
        {
            found.answer = Some(at_steps);
            between_steps = Some(count);
        } else if let Some(answer) = found.answer.as_mut().filter(|_| contradicted)
            // The claimed method at another step than the stated one is no fault of the model.
            && answer.method != Some(Support::Agrees)
            && let Some(cause) = mended(&causes, &methods)
        {
            let text = format!(
                "the rows do not follow {} as they stand, yet they do once this is mended: {}",
                submission
                    .claims
                    .method
                    .as_deref()
                    .unwrap_or("the claimed method"),
                cause.text
            );
            take_back(answer, text);
            mended_by.get_or_insert_with(|| {
                format!(
                    "the rows do not follow the method as they stand; nor do those of {}, for which this \
                     is likely: {}",
                    run.outcome.file, cause.text
                )
            });
        }
        for cause in causes {
            let known = |other: &CauseOutcome| other.kind == cause.kind.word();
            if audited
                .causes
                .iter()
                .any(|other| known(other) && other.file != run.outcome.file)
            {
                continue;
            }
            audited.causes.push(CauseOutcome {
                file: run.outcome.file.clone(),
                kind: cause.kind.word(),
                text: cause.text,
                number: cause.number,
                left_over: cause.left_over,
            });
        }
    }
}

/// A contradiction that a fault explains is none of the claim.
fn take_back(answer: &mut Answer, text: String) {
    if answer.support == Support::Contradicts {
        *answer = answer.clone().left_open(text);
    }
}

/// A fault that leaves exactly what the claimed method would have written; none where another
/// method or step has been at work.
fn mended<'a>(causes: &'a [Cause], methods: &[&'static Method]) -> Option<&'a Cause> {
    let other = |cause: &Cause| matches!(cause.kind, Kind::CoarserStep | Kind::OtherMethod);
    if causes.iter().any(other) {
        return None;
    }
    let is_claimed = |own: &'static Method| methods.iter().any(|m| m.name == own.name);
    causes
        .iter()
        .find(|cause| cause.method.is_some_and(is_claimed))
}
