//! The one integration binary of stepgauge.

/// Numbers from outside, as decimal text, and distances in units of the last place.
mod digits;

/// Certified enclosures (Arb): every number of `certified-values.json`, and every
/// built-in case.
mod causes;
mod certified;

/// Trajectories of general-purpose integrators against certified errors.
mod integrators;

/// The commands as users run them: arguments in, output and exit status out.
mod command;

/// What holds for any numbers and any bytes.
mod properties;

/// The shape of the project: imports, sizes, the top level.
mod tidy;

/// A time-stepping program that writes the files of the tests on evidence.
mod writer;

/// Which method wrote a file: the true one is always found, false claims are not believed.
mod evidence;

/// Which method wrote a file of another program.
mod attribution;
/// Whole files of honest programs through the audit.
mod printed;

/// Whole screens and reports, read by eye before they are accepted.
mod golden;

/// Published numbers and worked examples, each with its source.
mod published;

/// A folder made for one test, and the command run on it.
mod folder;

/// Binary files and packed text through the whole audit.
mod tables;

/// Long files: threads, blocks, guesses and quick arithmetic do not show.
mod killed;
mod long_files;
mod machine;

/// The same trajectory in every layout.
mod layouts;

/// One row for each time and channel: the report of the wide twin, in every order, cut anywhere.
mod long_tables;

/// Broken files and submissions: finding, line, exit status.
mod broken;

/// `steps` against plain loops of the same methods, and the command.
mod steps;

/// Ways to an undeserved pass, closed.
mod cheats;

/// Limits, requirements and refusals of a reviewer.
mod reviewers;

/// Files of rules with mistakes, and in an audit that is divided.
mod rules;

/// Submissions that look better than they are.
mod disguises;

/// Every method of the catalogue: its order, its stability as published.
mod methods;
mod misread;

/// Right files that once failed, claims that were believed on too little.
mod healthy;

/// Factors of single modes: measured against published ones.
mod growth;

/// Drafts of submissions against those of a person who knows the files.
mod draft;

/// The files of those drafts, with what a person writes for them.
mod draft_layouts;

/// What a draft cannot know is said; nothing is overwritten, nothing guessed without ground.
mod draft_open;

/// Which step or error setting a submission is told to take, and that it helps.
mod advice;

/// The HTML report as a strict parser sees it.
mod html;

/// Quiet runs, interruption, completions, manual pages, suggestions.
mod comfort;

/// What became worse since an earlier report.
mod against;

/// One audit in parts, joined again: the bytes of the undivided one, and every refusal.
mod merge;

/// Reports of every kind: where they may lie, what they hold, hostile names.
mod reports;

/// The commands of README.md, run as they stand.
mod readme;

/// `drive`: a simulator over cases and steps, commands that fail, plans with errors.
mod drive;

/// Binary tables and packed text of other programs beside their twin as text.
mod formats;

/// Limits of files, lines, columns, knots and folders, just within and just beyond.
mod edges;

/// Limits of models and of what is packed, and inputs made to keep the program busy.
mod hostile;

/// Any bytes, and seeds with changes, into every reader.
mod hostile_bytes;
