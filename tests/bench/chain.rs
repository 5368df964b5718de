//! The case of the benchmarks: a chain of cooling nodes as in `chain.toml`, but of any length.

use std::fmt::Write;
use std::path::Path;

use stepgauge::{Case, Library};

/// Lengths of chains that are timed.
pub const LENGTHS: [usize; 4] = [1, 4, 16, 64];

/// The window of every chain, in seconds.
pub const SPAN: f64 = 86_400.0;

const CAPACITIES: [u32; 4] = [900, 1500, 2400, 4000];
const CONDUCTANCES: [&str; 3] = ["0.8", "0.5", "0.3"];
const STARTS: [u32; 4] = [4, 5, 6, 8];

/// The case of a chain, as a case file.
pub fn text(length: usize) -> String {
    let (mut parameters, mut states) = (String::new(), String::new());
    for node in 1..=length {
        let capacity = CAPACITIES[(node - 1) % CAPACITIES.len()];
        let start = STARTS[(node - 1) % STARTS.len()];
        let _ = writeln!(
            parameters,
            "C_{node} = {{ value = {capacity}, unit = \"J/K\" }}"
        );
        let flow = |from: usize| format!("G_{from}*(T{from} - T{})", from + 1);
        let gained = match node {
            1 => "heat".to_owned(),
            _ => flow(node - 1),
        };
        let lost = if node == length {
            format!("G_o*(T{node} - T_o)")
        } else {
            let conductance = CONDUCTANCES[(node - 1) % CONDUCTANCES.len()];
            let _ = writeln!(
                parameters,
                "G_{node} = {{ value = {conductance}, unit = \"W/K\" }}"
            );
            flow(node)
        };
        let _ = write!(
            states,
            "\n[[states]]\nname = \"T{node}\"\nunit = \"degC\"\nstart = \"{start}\"\n\
             rate = \"({gained} - {lost})/C_{node}\"\n"
        );
    }
    format!(
        "title = \"Cooling chain of {length}\"\nfield = \"bench\"\n\
         about = \"Heat capacities in a row, heated at one end, cooled at the other.\"\n\
         source = \"ours\"\n\n[parameters]\n{parameters}\
         G_o = {{ value = 0.2, unit = \"W/K\" }}\n\
         T_o = {{ value = 30, unit = \"degC\" }}\n\
         heat = {{ value = 15, unit = \"W\" }}\n\n\
         [time]\nunit = \"s\"\nfrom = 0\nto = {SPAN}\n{states}\n\
         [limits]\nabsolute = 1e-6\nrelative = 1e-6\n"
    )
}

/// The name of the case in the library.
pub fn name(length: usize) -> String {
    format!("bench/chain-{length}")
}

/// The built-in cases and the chains, whose files are put into a folder.
pub fn library(folder: &Path) -> Library {
    let folder = folder.join("cases");
    std::fs::create_dir_all(&folder).unwrap();
    for length in LENGTHS {
        let path = folder.join(format!("chain-{length}.toml"));
        std::fs::write(path, text(length)).unwrap();
    }
    let mut library = Library::new();
    library.add_folder(&folder).unwrap();
    library
}

/// The chain of some length.
pub fn case(length: usize) -> Case {
    let folder = tempfile::tempdir().unwrap();
    let library = library(folder.path());
    library.load(&name(length), &Default::default()).unwrap()
}
