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
    assert_eq!(text(&output.stderr), "");
}

#[test]
fn a_sheet_may_come_from_standard_input() {
    let output = run(&["answer", "-"], Some(SPHERE));
    assert_eq!(code(&output), 0);
    assert!(text(&output.stdout).starts_with("area(s) = 50.26548245"), "{}", text(&output.stdout));
    let output = run(&["answer", "-", "--set", "r=1", "s"], Some(SPHERE));
    assert!(text(&output.stdout).starts_with("area(s) = 12.5663706"), "{}", text(&output.stdout));
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
        (&["answer", "-"], Some("s(u, v) = (u, v, 0) on u in [0, 1], v in [0, 1]\na = integral(1/u, s)"), 4),
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
    assert_eq!(lines[3], "v,u,x,y,z,nx,ny,nz,dA,weight");
    assert_eq!(lines.len(), 8);
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
    assert!(text(&run(&["manual"], None).stdout).contains(".TH quadrel"));
}

#[test]
fn help() {
    for command in ["", "answer", "element", "nodes", "speed"] {
        let arguments: Vec<&str> = [command, "--help"].into_iter().filter(|a| !a.is_empty()).collect();
        let name = if command.is_empty() { "help" } else { command };
        insta::assert_snapshot!(format!("help_{name}"), text(&run(&arguments, None).stdout));
    }
}
