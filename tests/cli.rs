//! The commands as a user runs them: exit codes, streams, documents, files.

use serde_json::Value;
use std::io::Write;
use std::path::Path;
use std::process::{Command, Output, Stdio};

const HEAD: &str = "examples/vessel-head.sheet";

fn run(arguments: &[&str], input: Option<&str>) -> Output {
    let mut command = Command::new(env!("CARGO_BIN_EXE_quadrel"));
    command
        .args(arguments)
        .current_dir(env!("CARGO_MANIFEST_DIR"))
        .env("NO_COLOR", "1")
        .stdin(Stdio::piped())
        .stdout(Stdio::piped())
        .stderr(Stdio::piped());
    let mut child = command.spawn().unwrap();
    // A command that does not read its input may be gone already.
    let _ = child.stdin.take().unwrap().write_all(input.unwrap_or("").as_bytes());
    child.wait_with_output().unwrap()
}

fn code(output: &Output) -> i32 {
    output.status.code().unwrap()
}

fn text(bytes: &[u8]) -> String {
    String::from_utf8(bytes.to_vec()).unwrap()
}

fn document(output: &Output) -> Value {
    serde_json::from_slice(&output.stdout).unwrap_or_else(|error| panic!("{error}: {}", text(&output.stdout)))
}

const SPHERE: &str = "r = 2\ns(v, u) = (r*sin(v)*cos(u), r*sin(v)*sin(u), r*cos(v)) on v in [0, pi], u in [0, 2*pi]\n";

#[test]
fn answers_go_to_standard_output() {
    let output = run(&["answer", HEAD], None);
    assert_eq!(code(&output), 0, "{}", text(&output.stderr));
    assert!(text(&output.stdout).starts_with("lining = 5.7023257"), "{}", text(&output.stdout));
    assert!(text(&output.stderr).lines().all(|line| line.starts_with("note: ")), "{}", text(&output.stderr));
}

#[test]
fn a_sheet_may_come_from_standard_input() {
    let output = run(&["answer", "-"], Some(SPHERE));
    assert_eq!(code(&output), 0);
    assert!(text(&output.stdout).starts_with("area(s) = 50.26548245"), "{}", text(&output.stdout));
    let output = run(&["answer", "-", "--set", "r=1", "s"], Some(SPHERE));
    assert!(text(&output.stdout).starts_with("with r = 1\narea(s) = 12.5663706"), "{}", text(&output.stdout));
}

#[test]
fn json_is_one_document_with_stable_keys() {
    let output = run(&["answer", HEAD, "--json"], None);
    assert_eq!(code(&output), 0);
    let document = document(&output);
    assert!(document["schema"].is_string());
    let first = &document["answers"][0];
    assert_eq!(first["name"], "lining");
    assert_eq!(first["kind"], "estimate");
    assert_eq!(first["unit"], "m^2");
    for key in ["value", "error", "evaluations", "seconds"] {
        assert!(first[key].is_number(), "{key}");
    }
    assert!(first["reason"].is_null());
    let vector = document["answers"].as_array().unwrap().iter().find(|a| a["name"] == "c").unwrap();
    assert_eq!(vector["value"].as_array().unwrap().len(), 3);
    assert_eq!(vector["error"].as_array().unwrap().len(), 3);
    assert_eq!(document["stamp"]["sheet_sha256"].as_str().unwrap().len(), 64);
}

#[test]
fn a_wrong_sheet_is_exit_code_3_with_its_errors_in_json_too() {
    let output = run(&["answer", "-", "--json"], Some("a = b + 1\nc = 2pi\n"));
    assert_eq!(code(&output), 3);
    let errors = document(&output)["errors"].as_array().unwrap().clone();
    assert_eq!(errors.len(), 2, "several errors are all shown");
    assert_eq!(errors[0]["line"], 1);
    assert_eq!(errors[0]["column"], 5);
    assert_eq!(errors[1]["hint"], "write `2*pi`");
    let message = text(&output.stderr);
    assert!(message.contains("standard input line 1, column 5: `b` is not defined"), "{message}");
    assert!(!message.contains('\x1b'), "NO_COLOR is respected");
}

#[test]
fn exit_codes() {
    let cases: &[(&[&str], Option<&str>, i32)] = &[
        (&["answer", "-"], Some(SPHERE), 0),
        (&["answer", "-", "--kind", "proved"], Some(SPHERE), 1),
        (&["answer", "-", "--rel", "1e-17"], Some(SPHERE), 1),
        (
            &["answer", "-", "--evaluations", "100"],
            Some("s(u, v) = (u, v, exp(sin(20*u)*cos(30*v))) on u in [0, 1], v in [0, 1]"),
            1,
        ),
        (&["answer", "-", "--rel", "-1"], Some(SPHERE), 2),
        (&["answer"], None, 2),
        (&["answer", "-", "unknown"], Some(SPHERE), 2),
        (&["answer", "-"], Some("a = "), 3),
        (&["answer", "-", "--set", "r=x"], Some(SPHERE), 3),
        (&["answer", "-"], Some("s(u, v) = (u, v, sqrt(u - 1)) on u in [0, 2], v in [0, 1]"), 4),
        (&["answer", "-"], Some("s(u, v) = (u, v, 0) on u in [0, 1], v in [0, 1]\na = integral(1/u^2, s)"), 4),
        (&["answer", "no/such.sheet"], None, 5),
        (&["element", "-", "t"], Some(SPHERE), 2),
        (&["nodes", "-", "-o", "no/such/folder/x.npy"], Some(SPHERE), 5),
        (&["nodes", "-", "-o", "x.txt"], Some(SPHERE), 2),
        (&["nodes", "-", "--grid", "99999999x99999999"], Some(SPHERE), 2),
        (&["--help"], None, 0),
        (&["--version"], None, 0),
    ];
    for (arguments, input, expected) in cases {
        let output = run(arguments, *input);
        assert_eq!(
            code(&output),
            *expected,
            "{arguments:?} {input:?}\n{}{}",
            text(&output.stdout),
            text(&output.stderr)
        );
        if *expected == 1 {
            assert!(text(&output.stdout).contains("tolerance not reached"), "the value and the reason are printed");
        }
    }
}

#[test]
fn failures_say_where() {
    let output = run(&["answer", "-"], Some("s(u, v) = (u, v, sqrt(u - 1)) on u in [0, 2], v in [0, 1]"));
    let message = text(&output.stderr);
    assert!(message.contains("undefined at u = ") && message.contains("`sqrt(u - 1)`"), "{message}");
    assert!(message.contains("at the position ("), "{message}");
}

#[test]
fn element_prints_the_forms() {
    let output = run(&["element", "-", "--json"], Some(SPHERE));
    assert_eq!(code(&output), 0);
    let document = document(&output);
    for key in ["dA", "E", "F", "G", "K", "H"] {
        assert!(document[key].is_string(), "{key}");
    }
    for key in ["tangent_u", "tangent_v", "normal"] {
        assert_eq!(document[key].as_array().unwrap().len(), 3, "{key}");
    }
    assert!(document["operations"].as_u64().unwrap() > 0);
}

/// The NPY array format 1.0: magic, version, header length, header, little-endian doubles.
fn read_npy(path: &Path) -> (String, Vec<f64>) {
    let bytes = std::fs::read(path).unwrap();
    assert_eq!(&bytes[..8], b"\x93NUMPY\x01\x00");
    let length = u16::from_le_bytes([bytes[8], bytes[9]]) as usize;
    assert_eq!((10 + length) % 64, 0);
    let header = text(&bytes[10..10 + length]);
    let data = bytes[10 + length..].chunks_exact(8).map(|b| f64::from_le_bytes(b.try_into().unwrap())).collect();
    (header, data)
}

#[test]
fn nodes_are_written_whole() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("nodes.npy");
    let output = run(&["nodes", "-", "--grid", "20x30", "--rule", "gauss", "-o", path.to_str().unwrap()], Some(SPHERE));
    assert_eq!(code(&output), 0, "{}", text(&output.stderr));
    let (header, data) = read_npy(&path);
    assert!(header.contains("'shape': (600, 10)"), "{header}");
    let area: f64 = data.chunks_exact(10).map(|row| row[9]).sum();
    // 4 pi r^2; Gauss with 20 nodes integrates sin v over (0, pi) to the last places.
    assert!((area - 16.0 * std::f64::consts::PI).abs() < 1e-12 * area, "{area}");
    // The normal of this patch is the position over the radius.
    assert!(data.chunks_exact(10).all(|row| (0..3).all(|i| (row[5 + i] - row[2 + i] / 2.0).abs() < 1e-14)));
    // A failure leaves nothing behind, not even a part.
    let path = folder.path().join("bad.csv");
    let sheet = "s(u, v) = (u, v, sqrt(u - 1)) on u in [0, 2], v in [0, 1]";
    let output = run(&["nodes", "-", "-o", path.to_str().unwrap()], Some(sheet));
    assert_eq!(code(&output), 4);
    assert_eq!(std::fs::read_dir(folder.path()).unwrap().count(), 1, "only the first table is there");
}

#[test]
fn csv_carries_its_stamp() {
    let output = run(&["nodes", "-", "--grid", "2x2"], Some(SPHERE));
    let table = text(&output.stdout);
    let lines: Vec<&str> = table.lines().collect();
    assert!(lines[0].starts_with("# quadrel ") && lines[1].starts_with("# sheet sha256 "), "{table}");
    assert_eq!(lines[3], "param_v,param_u,x,y,z,nx,ny,nz,dA,weight_dA");
    assert_eq!(lines.len(), 8);
}

#[test]
fn a_chain_is_one_table() {
    // Two walls of a box and its floor, the floor turned round: areas 2*3, 2*3 and 2*2, by hand.
    let sheet = "w(u, v) = (u, 0, v) on u in [0, 2], v in [0, 3]\nf(p, q) = (p, q, 0) on p in [0, 2], q in [0, 2]\n\
                 c = w + translate(w, (0, 2, 0)) - f\n";
    let table = text(&run(&["nodes", "-", "c", "--grid", "2x2"], Some(sheet)).stdout);
    let mut rows = table.lines().filter(|line| !line.starts_with('#'));
    assert_eq!(rows.next().unwrap(), "patch,param_1,param_2,x,y,z,nx,ny,nz,dA,weight_dA");
    let mut sums: Vec<(String, f64)> = Vec::new();
    for row in rows {
        let (patch, numbers) = row[1..].split_once("\",").unwrap();
        let weight: f64 = numbers.rsplit(',').next().unwrap().parse().unwrap();
        match sums.iter_mut().find(|(name, _)| name == patch) {
            Some((_, sum)) => *sum += weight,
            None => sums.push((patch.to_owned(), weight)),
        }
    }
    let weights: Vec<f64> = sums.iter().map(|(_, sum)| *sum).collect();
    assert_eq!(weights, [6.0, 6.0, -4.0], "{table}");
    assert_eq!((sums[0].0.as_str(), sums[2].0.as_str()), ("w", "f"));
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("c.npy");
    assert_eq!(code(&run(&["nodes", "-", "c", "--grid", "2x2", "-o", path.to_str().unwrap()], Some(sheet))), 0);
    let (header, data) = read_npy(&path);
    assert!(header.contains("'shape': (12, 11)"), "{header}");
    let patches: Vec<f64> = data.chunks_exact(11).map(|row| row[0]).collect();
    assert_eq!(patches, [0.0, 0.0, 0.0, 0.0, 1.0, 1.0, 1.0, 1.0, 2.0, 2.0, 2.0, 2.0]);
}

#[test]
fn capitals_name_a_table_too() {
    let folder = tempfile::tempdir().unwrap();
    for (name, magic) in [("T.NPY", &b"\x93NUMPY"[..]), ("T.Csv", b"# quadr")] {
        let path = folder.path().join(name);
        let output = run(&["nodes", "-", "--grid", "2x2", "-o", path.to_str().unwrap()], Some(SPHERE));
        assert_eq!(code(&output), 0, "{}", text(&output.stderr));
        assert!(std::fs::read(&path).unwrap().starts_with(magic), "{name}");
    }
}

#[test]
fn set_values_are_told_with_the_unit_they_were_taken_in() {
    let sheet = "d = 200 [mm]\ns(u, v) = (d*u, d*v, 0) on u in [0, 1], v in [0, 1]";
    let shown = |value: &str| text(&run(&["answer", "-", "--set", value], Some(sheet)).stdout);
    assert!(shown("d=0.2").starts_with("with d = 0.2 mm\n"), "{}", shown("d=0.2"));
    assert!(shown("d=0.2 [m]").starts_with("with d = 200 mm\n"), "{}", shown("d=0.2 [m]"));
    assert!(!text(&run(&["answer", "-"], Some(sheet)).stdout).contains("with "));
    let output = run(&["answer", "-", "--json", "--set", "d=0.2"], Some(sheet));
    assert_eq!(document(&output)["stamp"]["settings"]["set"], "d = 0.2 mm");
}

#[test]
fn unreached_tolerances_are_told_in_the_unit_of_the_answer() {
    let sheet = format!("{}F = flux((0, 0, z*1 [kPa/m]), s) as [kN]\n", SPHERE.replace("r = 2", "r = 2 [m]"));
    let output = run(&["answer", "-", "F", "--rel", "1e-15"], Some(&sheet));
    assert_eq!(code(&output), 1);
    let shown = text(&output.stdout);
    // The flux is 1 kPa/m times the volume 4/3 pi r^3, 33.51 kN: a relative 1e-15 of it is 3.35e-14 kN.
    assert!(shown.contains(" kN, allowed 3.35e-14 kN"), "{shown}");
    assert!(shown.contains("below what double precision can give"), "{shown}");
    let reason =
        document(&run(&["answer", "-", "F", "--rel", "1e-15", "--json"], Some(&sheet)))["answers"][0]["reason"]
            .to_string();
    assert!(reason.contains("allowed 3.35e-14 kN"), "{reason}");
}

#[test]
fn impossible_tolerances_are_refused() {
    let output = run(&["answer", "-", "--rel", "0"], Some(SPHERE));
    assert_eq!(code(&output), 2);
    assert!(text(&output.stderr).contains("--rel 0 together with --abs 0"));
    assert_eq!(code(&run(&["answer", "-", "--rel", "0", "--abs", "1e-6"], Some(SPHERE))), 0);
    for option in ["--rel", "--abs"] {
        let output = run(&["answer", "-", option, "-1"], Some(SPHERE));
        assert_eq!(code(&output), 2);
        let message = text(&output.stderr);
        assert!(message.contains("a tolerance is a number of at least 0") && !message.contains("-- -1"), "{message}");
    }
}

#[test]
fn text_that_is_passed_on_can_be_cited() {
    let output =
        run(&["answer", "-", "--set", "r=1"], Some("r = 2\ns(u, v) = (r*u, v, 0) on u in [0, 1], v in [0, 1]"));
    let shown = text(&output.stdout);
    let last = shown.lines().last().unwrap();
    // sha256sum of that text.
    assert!(last.starts_with("# quadrel ") && last.contains("sheet SHA-256 396978f6ae04"), "{last}");
    assert!(last.ends_with("rel 1e-9, abs 0, set r = 1"), "{last}");
}

#[test]
fn what_the_sheet_gives_is_exact_and_says_so() {
    let sheet =
        "alpha = 60 [deg]\nD = 2.4 [m]\nk = 0.1*D\nw = -3e-3 [kN]\nt = 1/3\nq = pi\nc = 2*k as [mm]\nv = (D, k, 0)\n";
    let names = ["alpha", "D", "k", "w", "t", "q", "c", "v"];
    let arguments = |more: &[&'static str]| [&["answer", "-"], &names[..], more].concat();
    let shown = text(&run(&arguments(&[]), Some(sheet)).stdout);
    for line in ["alpha = 60 deg  [exact]", "D = 2.4 m  [exact]", "k = 0.24 m  [exact]", "w = -0.003 kN  [exact]"] {
        assert!(shown.lines().any(|shown| shown == line), "{line}: {shown}");
    }
    assert!(shown.contains("c = 480 mm  [exact]") && shown.contains("  .y  = 0.24 m\n"), "{shown}");
    // Neither 1/3 nor pi is a short decimal: they keep the error of their rounding.
    for name in ["t = 0.33333", "q = 3.14159"] {
        let line = shown.lines().find(|line| line.starts_with(name)).unwrap();
        assert!(line.contains(" ± ") && line.contains("[estimate, "), "{line}");
    }
    let document = document(&run(&arguments(&["--json"]), Some(sheet)));
    let kinds: Vec<&str> =
        document["answers"].as_array().unwrap().iter().map(|answer| answer["kind"].as_str().unwrap()).collect();
    assert_eq!(kinds, ["exact", "exact", "exact", "exact", "estimate", "estimate", "exact", "exact"]);
    assert_eq!(document["answers"][0]["value"], 60.0);
    assert_eq!(document["answers"][0]["error"], 0.0);
    assert!(document["answers"][0]["seconds"].as_f64().unwrap().is_sign_positive(), "no minus before zero");
    let shown = text(&run(&["answer", "-", "alpha", "k", "--set", "alpha=50", "--set", "D=3"], Some(sheet)).stdout);
    assert!(shown.contains("alpha = 50 deg  [exact]") && shown.contains("k = 0.3 m  [exact]"), "{shown}");
}

#[test]
fn axes_of_equal_moments_are_not_invented() {
    // A sphere has three equal moments, a spheroid two; the axis of the spheroid is that of its rotation.
    let sheet = "b = 3\ns(v, u) = (b*sin(v)*cos(u), b*sin(v)*sin(u), 2*b*cos(v)) on v in [0, pi], u in [0, 2*pi]\n\
                 i = inertia(s)\n";
    let shown = text(&run(&["answer", "-"], Some(sheet)).stdout);
    assert!(!shown.contains("-0.000000"), "{shown}");
    // An axis has no sense of direction.
    let shown = shown.replace("-1.000000)", "1.000000)");
    assert_eq!(shown.matches("axis (0.000000, 0.000000, 1.000000)").count(), 1, "{shown}");
    assert_eq!(shown.matches("axis: any across the other (two equal moments)").count(), 2, "{shown}");
    let axes = document(&run(&["answer", "-", "--json"], Some(sheet)))["answers"][0]["principal_axes"].clone();
    assert!(axes[0].is_array() && axes[1].is_null() && axes[2].is_null(), "{axes}");
    let shown = text(&run(&["answer", "-"], Some(&sheet.replace("2*b*cos", "b*cos"))).stdout);
    assert!(shown.contains("  axes: any (equal moments)\n") && !shown.contains("axis ("), "{shown}");
}

#[test]
fn json_tells_warnings_with_their_place() {
    let sheet = "s(u, v) = (u, v, 0) on u in [0, 1], v in [0, 1]\na = area(-s)\n";
    let document = document(&run(&["answer", "-", "--json"], Some(sheet)));
    assert_eq!(document["warnings"][0]["line"], 2, "{document}");
    assert!(document["warnings"][0]["message"].is_string() && document["warnings"][0]["column"].is_number());
    assert!(document["warnings"][0].get("hint").is_some());
    assert!(document["answers"][0].get("components").is_none(), "a number has no components");
    assert_eq!(document["stamp"]["settings"]["rel"], 1e-9);
}

#[test]
fn notes_go_to_standard_error() {
    let sheet = format!("{SPHERE}f = flux((0, 0, 1), s)\n");
    let output = run(&["answer", "-", "f"], Some(&sheet));
    assert!(text(&output.stderr).starts_with("note: f: "), "{}", text(&output.stderr));
    assert!(!text(&output.stdout).contains("note"), "{}", text(&output.stdout));
}

#[test]
fn nothing_to_answer_is_said() {
    for sheet in ["", "a = 3\n"] {
        let output = run(&["answer", "-"], Some(sheet));
        assert_eq!(code(&output), 0);
        assert!(text(&output.stderr).starts_with("nothing to answer: "), "{}", text(&output.stderr));
        assert_eq!(text(&output.stdout), "");
    }
}

#[test]
fn speed_measures() {
    let output =
        run(&["speed", "-", "--grid", "100x100", "--scattered", "1000", "--repeats", "1", "--json"], Some(SPHERE));
    assert_eq!(code(&output), 0, "{}", text(&output.stderr));
    let document = document(&output);
    assert!(document["grid"]["ns_per_point"].is_number() && document["scattered"]["ns_per_point"].is_number());
    assert_eq!(document["grid"]["route"], "machine code");
    assert!(document["compile_us"].is_number());
}

/// Two lanes are everywhere; four are measured where the machine has them, else refused.
#[test]
fn lanes_are_measured_or_refused() {
    let speed = |lanes: &str| {
        let arguments =
            ["speed", "-", "--grid", "20x20", "--scattered", "10", "--repeats", "1", "--json", "--lanes", lanes];
        run(&arguments, Some(SPHERE))
    };
    let two = speed("2");
    assert_eq!((code(&two), &document(&two)["lanes"]), (0, &serde_json::json!(2)));
    let four = speed("4");
    if quadrel::kernel::Lanes::Four.is_supported() {
        assert_eq!((code(&four), &document(&four)["lanes"]), (0, &serde_json::json!(4)));
        assert_eq!(document(&two)["grid"]["sum"], document(&four)["grid"]["sum"]);
    } else {
        assert_eq!(code(&four), 2);
        assert!(text(&four.stderr).contains("--lanes 4"));
    }
    for wrong in ["0", "3", "8", "many"] {
        assert_eq!(code(&speed(wrong)), 2, "{wrong}");
    }
}

#[test]
fn the_same_bits_for_any_number_of_threads() {
    let sheet = "s(u, v) = (u, v, sin(9*u)*cos(7*v) + abs(u - v^2)) on u in [0, 1], v in [0, 1]";
    let value = |threads: &str| {
        let output = run(&["answer", "-", "--json", "--threads", threads], Some(sheet));
        document(&output)["answers"][0]["value"].as_f64().unwrap().to_bits()
    };
    assert_eq!(value("1"), value("2"));
    assert_eq!(value("1"), value("4"));
}

#[test]
fn completions_and_manual_are_generated() {
    assert!(text(&run(&["completions", "bash"], None).stdout).contains("quadrel"));
    let page = text(&run(&["manual"], None).stdout);
    assert!(page.contains(".TH quadrel"));
    // Hyphens are escaped in a manual page.
    for part in
        ["quadrel answer", "\\-\\-evaluations", "quadrel nodes", "\\-\\-grid", "EXIT CODES", "THE SHEET", "ERROR MEANS"]
    {
        assert!(page.contains(part), "{part}");
    }
}

#[test]
fn help() {
    for command in ["", "answer", "element", "nodes", "speed"] {
        let arguments: Vec<&str> = [command, "--help"].into_iter().filter(|a| !a.is_empty()).collect();
        let name = if command.is_empty() { "help" } else { command };
        insta::assert_snapshot!(format!("help_{name}"), text(&run(&arguments, None).stdout));
    }
}

/// A disk that is full is a failure of output, not a success.
#[cfg(target_os = "linux")]
#[test]
fn a_full_disk_is_told() {
    let full = std::fs::OpenOptions::new().write(true).open("/dev/full").expect("/dev/full");
    let output = std::process::Command::new(env!("CARGO_BIN_EXE_quadrel"))
        .args(["answer", "examples/belt.sheet"])
        .stdout(full)
        .stderr(std::process::Stdio::piped())
        .output()
        .expect("a run");
    assert_eq!(output.status.code(), Some(5));
    assert!(text(&output.stderr).contains("standard output"));
}
