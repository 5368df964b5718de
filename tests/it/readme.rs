use std::path::Path;

use crate::folder::Folder;

/// The commands of the blocks marked `shell`, in their order.
fn commands(readme: &str) -> Vec<Vec<String>> {
    let mut commands = Vec::new();
    let mut within = false;
    for line in readme.lines() {
        match line {
            "```shell" => within = true,
            "```" => within = false,
            _ if within => commands.push(words(line)),
            _ => {}
        }
    }
    commands
}

/// Words between blanks; quotes hold several together.
fn words(line: &str) -> Vec<String> {
    let mut words = vec![String::new()];
    let mut quoted = false;
    for c in line.chars() {
        match c {
            '"' => quoted = !quoted,
            ' ' if !quoted => words.push(String::new()),
            _ => words.last_mut().unwrap().push(c),
        }
    }
    words
}

fn copy(from: &Path, to: &Path) {
    std::fs::create_dir_all(to).unwrap();
    for entry in std::fs::read_dir(from).unwrap() {
        let entry = entry.unwrap();
        let target = to.join(entry.file_name());
        if entry.file_type().unwrap().is_dir() {
            copy(&entry.path(), &target);
        } else {
            std::fs::copy(entry.path(), target).unwrap();
        }
    }
}

#[test]
fn the_commands_run_as_they_stand() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR"));
    let readme = std::fs::read_to_string(root.join("README.md")).unwrap();
    let folder = Folder::new();
    copy(&root.join("demo-runs"), &folder.path("demo-runs"));
    let commands = commands(&readme);
    assert!(commands.len() >= 8, "{commands:?}");
    let python = std::process::Command::new("python3")
        .arg("--version")
        .output();
    for command in commands {
        let arguments: Vec<&str> = command.iter().map(String::as_str).collect();
        assert_eq!(arguments[0], "stepgauge");
        if arguments[1] == "drive" && python.is_err() {
            println!("no python3 here: {arguments:?} is left out");
            continue;
        }
        let ran = folder.run(&arguments[1..]);
        assert_eq!(ran.status, 0, "{arguments:?}: {}{}", ran.stdout, ran.stderr);
        for pair in arguments.windows(2).filter(|pair| pair[0] == "--write") {
            assert!(folder.path(pair[1]).exists(), "{pair:?}");
        }
    }
}
