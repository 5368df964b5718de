//! An audit that is killed at any moment leaves each report as it was, or whole and new.

use std::process::{Command, Stdio};
use std::time::Duration;

use crate::folder::{CASE, Folder, program, sound};

/// Kills of one test run.
const KILLS: u32 = 200;
/// The old report.
const OLD: &str = "{\"old\": true}\n";

#[test]
fn reports_are_old_or_new_and_never_half() {
    let folder = Folder::new();
    folder.write("s/run.csv", sound());
    let stated = format!("case = \"{CASE}\"\n[[runs]]\nfile = \"run.csv\"\n");
    folder.write("s/submission.toml", stated);
    let reports = ["report.json", "page.html", "table.csv"];
    let command = || {
        let mut command = Command::new(program());
        command.current_dir(folder.path("."));
        command.args(["audit", "s", "--quiet"]);
        for report in reports {
            command.args(["--write", report]);
        }
        command.stdout(Stdio::null()).stderr(Stdio::null());
        command
    };
    let read = |report: &str| std::fs::read_to_string(folder.path(report)).unwrap();
    // How long it takes here decides over when it is killed, nothing else.
    let begun = std::time::Instant::now();
    assert!(command().status().unwrap().success());
    let whole = begun.elapsed();
    let new = reports.map(read);
    let (mut old, mut fresh) = (0, 0);
    for kill in 0..KILLS {
        for report in reports {
            folder.write(report, OLD);
        }
        let mut child = command().spawn().unwrap();
        // Spread over the whole of it, most of them near its end, where reports are written.
        let part = f64::from(kill) / f64::from(KILLS);
        std::thread::sleep(Duration::from_secs_f64(
            1.1 * whole.as_secs_f64() * part.sqrt(),
        ));
        let _ = child.kill();
        let _ = child.wait();
        for (report, new) in reports.iter().zip(&new) {
            let found = read(report);
            old += u32::from(found == OLD);
            fresh += u32::from(found == *new);
            assert!(
                found == OLD || found == *new,
                "{report} after kill {kill}: {found}"
            );
        }
    }
    // Kills before and after the writing, or nothing was shown.
    assert!(old > 0 && fresh > 0, "{old} old, {fresh} new");
}
