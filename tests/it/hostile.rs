//! What is looked for here grows without end, or with the square of the input: each of these
//! has to come to its end at all. How long they take is looked at by hand.

use std::io::Write;
use std::path::Path;

use flate2::Compression;
use flate2::write::GzEncoder;
use stepgauge::case::{Case, MOST_STATES, Replacements};
use stepgauge::fault::Fault;
use stepgauge::formula::{self, Formula};
use stepgauge::submission::{Purpose, Rules, Submission};
use stepgauge::trajectory::columns::{self, Data, Format};
use stepgauge::trajectory::packed;

use crate::folder::{Folder, state, trial};

fn texts(faults: &[Fault]) -> String {
    faults.iter().map(|fault| format!("{fault}\n")).collect()
}

/// A case of one state, with something more at its end.
fn case(from: &str, to: &str, more: &str) -> String {
    trial(from, to, &(state("x", 1.0, "-x") + more))
}

fn train(first: &str, period: &str, width: &str, count: &str) -> String {
    format!(
        "[[inputs]]\nname = 'u'\nunit = 'V'\nshape = 'pulse-train'\nheight = 1\n\
         from = {first}\nperiod = {period}\nwidth = {width}\n{count}"
    )
}

/// What becomes of a case, exact solution included.
fn solved(text: &str) -> Result<(), String> {
    let all = |faults: Vec<Fault>| texts(&faults);
    let case = Case::parse("o", text, &Replacements::new()).map_err(all)?;
    case.exact().map(|_| ()).map_err(|fault| fault.to_string())
}

#[test]
fn a_train_of_a_million_million_pulses_is_refused_at_once() {
    for (from, to, first, period, width) in [
        // Within the window.
        ("0", "1e12", "0", "1", "0.5"),
        // Before it: the pulses that are over are passed over, however many.
        ("1e12", "2e12", "0", "1", "0.5"),
        // So long before it that a number of a pulse and the next one are the same.
        ("0", "1", "-1e30", "1", "0.5"),
        ("0", "1", "-1e18", "1", "0.999"),
        // So close that their times are the same.
        ("1e3", "1001", "1e3", "1e-40", "5e-41"),
        ("0", "1", "-1", "1e-300", "1e-301"),
    ] {
        for count in ["", "count = 1e12\n"] {
            let text = case(from, to, &train(first, period, width, count));
            let what = format!("{from} {to} {first} {period} {count}");
            let told = solved(&text);
            let refused = told
                .as_ref()
                .is_err_and(|told| told.contains("jumps more than 100000"));
            // A train that is over before the window has no pulse in it.
            assert!(
                refused || (told.is_ok() && !count.is_empty()),
                "{what}: {told:?}"
            );
        }
    }
}

#[test]
fn as_many_jumps_as_are_allowed_are_taken_and_one_more_is_not() {
    // 50,000 pulses have as many beginnings and ends; the first one begins at 1.
    let text = |count: &str| {
        case(
            "0",
            "60000",
            &train("1", "1", "0.5", &format!("count = {count}\n")),
        )
    };
    assert_eq!(solved(&text("50000")), Ok(()));
    let told = solved(&text("50001")).unwrap_err();
    assert!(
        told.contains("input `u` jumps more than 100000 times"),
        "{told}"
    );
}

#[test]
fn states_are_counted() {
    let states = |count: usize| {
        let more: Vec<String> = (1..count)
            .map(|k| format!("[[states]]\nname = 'x{k}'\nunit = 'm'\nstart = 1\nrate = '-x{k}'\n"))
            .collect();
        solved(&case("0", "1", &more.concat()))
    };
    assert_eq!(states(MOST_STATES), Ok(()));
    let told = states(MOST_STATES + 1).unwrap_err();
    assert!(told.contains("65 states, at most 64 are allowed"), "{told}");
}

#[test]
fn inputs_are_counted() {
    let inputs = |count: usize| {
        let one =
            |k| format!("[[inputs]]\nname = 'u{k}'\nunit = ''\nshape = 'constant'\nvalue = 1\n");
        solved(&case("0", "1", &(0..count).map(one).collect::<String>()))
    };
    assert_eq!(inputs(32), Ok(()));
    let told = inputs(33).unwrap_err();
    assert!(told.contains("33 inputs, at most 32 are allowed"), "{told}");
}

#[test]
fn outputs_are_counted() {
    let outputs = |count: usize| {
        let one = |k| format!("[[outputs]]\nname = 'y{k}'\nunit = 'm'\nvalue = '2*x'\n");
        solved(&case("0", "1", &(0..count).map(one).collect::<String>()))
    };
    assert_eq!(outputs(512), Ok(()));
    let told = outputs(513).unwrap_err();
    assert!(
        told.contains("513 outputs, at most 512 are allowed"),
        "{told}"
    );
}

#[test]
fn parameters_are_counted() {
    let parameters = |count: usize| {
        let lines = (0..count).map(|k| format!("p{k} = {{ value = 1, unit = '' }}\n"));
        solved(&case(
            "0",
            "1",
            &format!("[parameters]\n{}", lines.collect::<String>()),
        ))
    };
    assert_eq!(parameters(512), Ok(()));
    let told = parameters(513).unwrap_err();
    assert!(
        told.contains("at most 512 parameters are allowed"),
        "{told}"
    );
}

#[test]
fn inputs_of_the_most_generators_are_solved_or_refused_in_time() {
    let list = vec!["1e-9"; 16].join(",");
    let inputs = (0..32).map(|k| {
        format!(
            "[[inputs]]\nname = 'u{k}'\nunit = ''\nshape = 'polynomial'\ncoefficients = [{list}]\n"
        )
    });
    let text = case("0", "1", &inputs.collect::<String>());
    let _ = solved(&text);
}

#[test]
fn jumps_count_the_more_the_more_states_jump() {
    let states: String = (1..MOST_STATES)
        .map(|k| format!("[[states]]\nname = 'x{k}'\nunit = 'm'\nstart = 1\nrate = '-x{k}'\n"))
        .collect();
    let pulses = |count: usize| train("1", "1", "0.5", &format!("count = {count}\n"));
    // 66 numbers: 66 * 66 * 2754 products are twelve million at most.
    let of_states = |count| case("0", "60000", &(states.clone() + &pulses(count)));
    assert_eq!(solved(&of_states(1377)), Ok(()));
    let told = solved(&of_states(1378)).unwrap_err();
    assert!(
        told.contains("jump 2756 times, too often for states and inputs of 66"),
        "{told}"
    );
    let list = vec!["1e-60"; 16].join(",");
    let inputs = (0..31).map(|k| {
        format!(
            "[[inputs]]\nname = 'p{k}'\nunit = ''\nshape = 'polynomial'\ncoefficients = [{list}]\n"
        )
    });
    let text = inputs.collect::<String>() + &pulses(5000);
    let told = solved(&case("0", "60000", &text)).unwrap_err();
    assert!(
        told.contains("jump 10000 times, too often for states and inputs of 499"),
        "{told}"
    );
}

/// Half a megabyte of mistakes, each of which has a place to be looked up.
#[test]
fn a_list_of_mistakes_does_not_take_for_ever() {
    let list = "nan,".repeat(150_000);
    let more = format!(
        "[[inputs]]\nname = 'u'\nunit = ''\nshape = 'held-samples'\ntimes = [{list}]\nvalues = [{list}]\n"
    );
    let told = solved(&case("0", "1", &more)).unwrap_err();
    assert!(
        told.contains("this is not a finite number"),
        "{}",
        &told[..80]
    );
}

#[test]
fn rules_without_end_do_not_take_for_ever() {
    let long = |text: String| {
        assert!(text.len() < 1 << 20);
        Rules::parse(&text, Purpose::Everything)
    };
    let told = |rules: Result<Rules, Vec<Fault>>| texts(&rules.unwrap_err());
    let require = "[[require]]\ncase = 'a/b'\n";
    let methods = "'RK4',".repeat(150_000);
    let cases = (0..30_000).map(|k| format!("[case_limits.'a/{k}']\nx=1\n"));
    let limits = (0..60_000).map(|k| format!("x{k}=1\n"));
    for (text, count) in [
        (require.repeat(30_000), 30_000),
        (format!("{require}methods = [{methods}]\n"), 150_001),
        (cases.collect(), 60_000),
        (format!("[limits]\n{}", limits.collect::<String>()), 60_001),
    ] {
        let found = told(long(text));
        let wanted = format!("has {count} limits, requirements and methods, at most 2000 are read");
        assert!(found.contains(&wanted), "{found}");
    }
    // The edge is within.
    assert!(Rules::parse(&require.repeat(2000), Purpose::Everything).is_ok());
    assert!(Rules::parse(&require.repeat(2001), Purpose::Everything).is_err());
}

#[test]
fn brackets_and_dots_of_toml_do_not_exhaust_the_stack() {
    let many = 400_000;
    for text in [
        format!("case = {}", "[".repeat(many)),
        format!("case = {}", "{a=".repeat(many / 3)),
        format!("{}x = 1", "a.".repeat(many)),
        format!("[{}x]", "a.".repeat(many)),
        format!("[[{}x]]", "a.".repeat(many)),
    ] {
        assert!(Submission::parse(&text, Path::new(".")).is_err());
        assert!(Rules::parse(&text, Purpose::Everything).is_err());
        assert!(Case::parse("o", &text, &Replacements::new()).is_err());
    }
}

#[test]
fn runs_and_keys_of_a_submission_are_counted() {
    let folder = tempfile::tempdir().unwrap();
    let parse = |text: &str| match Submission::parse(text, folder.path()) {
        Ok(_) => String::new(),
        Err(faults) => texts(&faults),
    };
    let runs = |count: usize| {
        let one = |k| {
            std::fs::write(folder.path().join(format!("{k}")), "").unwrap();
            format!("[[runs]]\nfile = '{k}'\n")
        };
        (0..count).map(one).collect::<String>()
    };
    assert_eq!(parse(&runs(1000)), "");
    assert!(parse(&runs(1001)).contains("at most 1000 runs are read"));
    let keys = |table: &str, count: usize| {
        let keys = (0..count).map(|k| format!("k{k} = 1\n"));
        format!(
            "[[runs]]\nfile = '0'\n[{table}]\n{}",
            keys.collect::<String>()
        )
    };
    assert_eq!(parse(&keys("parameters", 600)), "");
    for table in ["parameters", "columns"] {
        let told = parse(&keys(table, 601));
        assert!(
            told.contains(&format!("[{table}] has 601 keys, at most 600")),
            "{told}"
        );
    }
}

#[test]
fn formulas_have_a_length_and_a_depth() {
    let parse = |text: &str| match Formula::parse(text, &|_| Some(0)) {
        Ok(formula) => formula
            .evaluate(&[1.0f64.into(); 1] as &[stepgauge::number::Double])
            .map(|_| ())
            .map_err(|_| String::new()),
        Err(fault) => Err(fault.to_string()),
    };
    let (length, depth) = (formula::MOST_CHARACTERS, formula::MOST_NESTING);
    let sum = |bytes: usize| format!("1{}", "+1".repeat((bytes - 1) / 2));
    assert_eq!(parse(&format!("{} ", sum(length - 1))), Ok(()));
    let told = parse(&format!("{}  ", sum(length - 1))).unwrap_err();
    assert!(told.contains("at most 65536 are read"), "{told}");
    for (open, close) in [("(", ")"), ("sin(", ")"), ("-", ""), ("2^", "")] {
        let nested = |depth: usize| format!("{}1{}", open.repeat(depth), close.repeat(depth));
        // A call is a pending name and bracket in one or two parts.
        let deepest = (1..=depth)
            .rev()
            .find(|&depth| parse(&nested(depth)).is_ok());
        let deepest = deepest.unwrap_or(0);
        assert!(deepest + 1 >= depth / 2, "{open}: {deepest}");
        let told = parse(&nested(depth + 1)).unwrap_err();
        assert!(
            told.contains("nested more than 1000 deep"),
            "{open}: {told}"
        );
    }
}

/// Rows without end that pack well: 100 MB in 150 kB.
fn bomb() -> Vec<u8> {
    let rows = b"1,2\n".repeat(1 << 18);
    let mut packed = GzEncoder::new(Vec::new(), Compression::best());
    packed.write_all(b"t,x\n").unwrap();
    for _ in 0..100 {
        packed.write_all(&rows).unwrap();
    }
    packed.finish().unwrap()
}

#[test]
fn a_gzip_bomb_is_refused() {
    let folder = Folder::new();
    let bytes = bomb();
    assert!(bytes.len() < 1 << 20, "{}", bytes.len());
    folder.write("run.csv.gz", bytes);
    let case = ["--case", "electrical/rc-constant", "--column", "v_c=x"];
    let ran = folder.audit(&[&["run.csv.gz"], &case[..]].concat());
    assert_eq!(ran.status, 2, "{}", ran.seen());
    assert!(
        ran.seen()
            .contains("far beyond its size: hand it in unpacked"),
        "{}",
        ran.seen()
    );
}

/// What is packed well and small, as a run at rest, is read.
#[test]
fn fifteen_megabytes_of_rows_at_rest_are_unpacked() {
    let rows =
        b"1.000000,2.000000,2.000000,2.000000,2.000000,2.000000,2.00000000\n".repeat(1 << 20);
    let mut packed = GzEncoder::new(Vec::new(), Compression::best());
    packed.write_all(&rows[..15 << 20]).unwrap();
    let packed = packed.finish().unwrap();
    let stream = packed::open(&Data::memory(packed), Format::Gzip).unwrap();
    let read = std::io::copy(&mut { stream }, &mut std::io::sink());
    assert_eq!(read.unwrap(), 15 << 20);
}

/// An archive with one deflated member of so many zero bytes, named so often in the directory.
fn archive(length: usize, times: u16) -> Vec<u8> {
    let content = vec![0u8; length];
    let mut packed = flate2::write::DeflateEncoder::new(Vec::new(), Compression::best());
    packed.write_all(&content).unwrap();
    let packed = packed.finish().unwrap();
    let mut crc = flate2::Crc::new();
    crc.update(&content);
    let mut sizes = crc.sum().to_le_bytes().to_vec();
    sizes.extend((packed.len() as u32).to_le_bytes());
    sizes.extend((length as u32).to_le_bytes());
    let mut bytes = b"PK\x03\x04\x14\0\0\0\x08\0\0\0\0\0".to_vec();
    bytes.extend(&sizes);
    bytes.extend(5u16.to_le_bytes());
    bytes.extend([0, 0]);
    bytes.extend(b"a.npy");
    bytes.extend(&packed);
    let start = bytes.len() as u32;
    for number in 0..times {
        let name = format!("{number:05}");
        bytes.extend(b"PK\x01\x02\x14\0\x14\0\0\0\x08\0\0\0\0\0");
        bytes.extend(&sizes);
        bytes.extend(5u16.to_le_bytes());
        bytes.extend([0; 16]);
        bytes.extend(name.as_bytes());
    }
    let size = bytes.len() as u32 - start;
    bytes.extend(b"PK\x05\x06\0\0\0\0");
    bytes.extend([times.to_le_bytes(), times.to_le_bytes()].concat());
    bytes.extend([size.to_le_bytes(), start.to_le_bytes()].concat());
    bytes.extend([0, 0]);
    bytes
}

#[test]
fn an_archive_that_unpacks_to_far_more_than_its_size_is_refused() {
    let refused = |bytes: Vec<u8>| {
        let open = || columns::open(&Data::memory(bytes), Format::Npz);
        open().err().map(|fault| fault.to_string()).unwrap()
    };
    let told = refused(archive(400 << 20, 1));
    assert!(
        told.contains("far beyond its size: hand it in unpacked"),
        "{told}"
    );
    // The same bytes under many names: each is within bounds, all of them are not.
    let told = refused(archive(10 << 20, 10_000));
    assert!(
        told.contains("far beyond its size: hand it in unpacked"),
        "{told}"
    );
    let told = refused(archive(100, 2));
    assert!(told.contains("its members lie over each other"), "{told}");
    // What is well within bounds goes on to the next question.
    let told = refused(archive(100, 1));
    assert!(
        !told.contains("far beyond") && !told.contains("over each other"),
        "{told}"
    );
}

/// One eigenvalue many times over: the iteration for eigenvalues went round in circles without
/// end, and the search for causes solved the model two thousand times.
#[test]
fn a_dense_model_of_64_states_is_audited_to_its_end() {
    let folder = Folder::new();
    let rate = |k: usize| {
        let term = |j: usize| {
            let sign = if (j * k) % 2 == 1 { '+' } else { '-' };
            let entry = 0.1 * ((j * 7 + k * 3) % 11) as f64 / 11.0;
            format!("{sign}{entry:.4}*x{j}")
        };
        format!("-3*x{k}{}", (0..64).map(term).collect::<String>())
    };
    let more = (1..64).map(|k| {
        let rate = rate(k);
        format!("[[states]]\nname = 'x{k}'\nunit = 'm'\nstart = 1\nrate = '{rate}'\n")
    });
    let text = case("0", "10", &more.collect::<String>());
    let text = text.replacen("rate = '-x'", &format!("rate = '{}'", rate(0)), 1);
    folder.write(
        "cases/o.toml",
        text.replacen("name = 'x'", "name = 'x0'", 1),
    );
    // Stamps that lie on no grid, so that every row has a matrix of its own.
    let rows = (0..60).map(|k| {
        let time = (k * k) as f64 * 10.0 / (59.0 * 59.0);
        let values = (0..64).map(|k| format!(",{}", (1 + k) as f64 * (-time).exp()));
        format!("{time}{}\n", values.collect::<String>())
    });
    let names: String = (0..64).map(|k| format!(",x{k}")).collect();
    folder.write("run.csv", format!("t{names}\n{}", rows.collect::<String>()));
    let ran = folder.audit(&["run.csv", "--case", "trial/o", "--cases", "cases"]);
    assert_eq!(ran.verdict(), "fail", "{}", ran.seen());
}

/// Which of the parameters is off by a factor was asked by reading the whole file again for each
/// of some hundred factors: that took hours.
#[test]
fn five_hundred_parameters_are_not_each_asked_for_a_factor() {
    let folder = Folder::new();
    let remark = format!("# {}\n", "x".repeat(600));
    let parameters = (0..500).map(|k| format!("p{k} = {{ value = 1, unit = '' }}\n{remark}"));
    let more = format!("[parameters]\n{}", parameters.collect::<String>());
    folder.write("cases/o.toml", case("0", "10", &more));
    let rows = (0..=50).map(|k| format!("{},{}\n", 0.2 * f64::from(k), f64::from(k % 7)));
    folder.write("run.csv", format!("t,x\n{}", rows.collect::<String>()));
    let ran = folder.audit(&[
        "run.csv",
        "--case",
        "trial/o",
        "--cases",
        "cases",
        "--absolute",
        "1e-3",
    ]);
    assert_eq!(ran.verdict(), "fail", "{}", ran.seen());
}

/// Every pair of 513 columns was exchanged, each with the rows it would have made: more than
/// twenty gigabytes.
#[test]
fn hundreds_of_columns_are_not_all_exchanged_by_pairs() {
    let folder = Folder::new();
    let output = |k: u32| format!("[[outputs]]\nname = 'y{k}'\nunit = 'm'\nvalue = '{k}*x'\n");
    let outputs = (1..=512).map(output);
    folder.write(
        "cases/o.toml",
        case("0", "10", &outputs.collect::<String>()),
    );
    let names: String = (1..=512).map(|k| format!(",y{k}")).collect();
    let rows = (0..=60u32).map(|row| {
        let values = (0..=512).map(|k| format!(",{}", (row * k) % 17));
        format!("{}{}\n", f64::from(row) / 6.0, values.collect::<String>())
    });
    folder.write(
        "run.csv",
        format!("t,x{names}\n{}", rows.collect::<String>()),
    );
    let ran = folder.audit(&["run.csv", "--case", "trial/o", "--cases", "cases"]);
    assert_eq!(ran.verdict(), "fail", "{}", ran.seen());
}
