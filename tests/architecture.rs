//! Folders are the stages of the pipeline: each may use those before it, none after.

use std::fs;
use std::path::{Path, PathBuf};

/// The stages in order.
const ORDER: &[&str] = &[
    "expression",
    "calculus",
    "language",
    "enclosure",
    "simplify",
    "geometry",
    "kernel",
    "quadrature",
    "integrals",
    "study",
    "report",
    "cli",
];

/// Folders that may use less than everything before them.
const ONLY: &[(&str, &[&str])] =
    &[("calculus", &["expression"]), ("enclosure", &["expression"]), ("kernel", &["expression"]), ("quadrature", &[])];

/// Files that may contain unsafe code: they own machine code or choose processor features.
const UNSAFE: &[&str] = &["src/kernel/machine_code.rs", "src/kernel/interpreter.rs"];

fn rust_files(folder: &Path, found: &mut Vec<PathBuf>) {
    for entry in fs::read_dir(folder).expect("a folder of sources") {
        let path = entry.expect("an entry").path();
        if path.is_dir() {
            rust_files(&path, found);
        } else if path.extension().is_some_and(|extension| extension == "rs") {
            found.push(path);
        }
    }
}

/// Stages mentioned as `crate::stage`, `super::super::stage` or within `crate::{...}` in code (comments do not count).
fn used_stages(text: &str) -> Vec<(usize, String)> {
    let code: String = text.lines().map(|line| line.split("//").next().unwrap_or("")).collect::<Vec<_>>().join("\n");
    let mut used = Vec::new();
    for (at, found) in code.match_indices("crate::").chain(code.match_indices("super::super::")) {
        let rest = &code[at + found.len()..];
        let line = code[..at].matches('\n').count() + 1;
        let names = if rest.starts_with('{') { group_heads(rest) } else { vec![leading_name(rest)] };
        used.extend(names.into_iter().filter(|name| ORDER.contains(&name.as_str())).map(|name| (line, name)));
    }
    used
}

fn leading_name(text: &str) -> String {
    text.trim_start().chars().take_while(|c| c.is_alphanumeric() || *c == '_').collect()
}

/// First names of the paths directly inside a group that opens `text`.
fn group_heads(text: &str) -> Vec<String> {
    let mut depth = 0;
    let mut heads = Vec::new();
    for (at, c) in text.char_indices() {
        match c {
            '{' => depth += 1,
            '}' => depth -= 1,
            _ => {}
        }
        if depth == 0 {
            break;
        }
        if depth == 1 && (c == '{' || c == ',') {
            heads.push(leading_name(&text[at + 1..]));
        }
    }
    heads
}

#[test]
fn stages_use_only_earlier_stages() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR")).join("src");
    let mut wrong = Vec::new();
    let mut checked = 0;
    for (position, stage) in ORDER.iter().enumerate() {
        let folder = root.join(stage);
        if !folder.is_dir() {
            continue;
        }
        let allowed: Vec<&str> = match ONLY.iter().find(|(name, _)| name == stage) {
            Some((_, allowed)) => allowed.to_vec(),
            None => ORDER[..position].to_vec(),
        };
        let mut files = Vec::new();
        rust_files(&folder, &mut files);
        for file in files {
            checked += 1;
            let text = fs::read_to_string(&file).expect("a source file");
            for (line, used) in used_stages(&text) {
                if used != *stage && !allowed.contains(&used.as_str()) {
                    wrong.push(format!("{}:{line} uses {used}", file.display()));
                }
            }
        }
    }
    assert!(checked > 30, "the sources were not found");
    assert!(wrong.is_empty(), "wrong-way uses:\n{}", wrong.join("\n"));
}

#[test]
fn every_folder_is_a_stage() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR")).join("src");
    for entry in fs::read_dir(root).expect("the sources") {
        let path = entry.expect("an entry").path();
        if path.is_dir() {
            let name = path.file_name().and_then(|name| name.to_str()).expect("a name");
            assert!(ORDER.contains(&name), "src/{name} is not in the order of stages");
        }
    }
}

#[test]
fn unsafe_code_stands_in_its_files_only() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR"));
    let mut files = Vec::new();
    rust_files(&root.join("src"), &mut files);
    for file in files {
        let name = file.strip_prefix(root).expect("a source").to_string_lossy().replace('\\', "/");
        let text = fs::read_to_string(&file).expect("a source file");
        let code: String =
            text.lines().map(|line| line.split("//").next().unwrap_or("")).collect::<Vec<_>>().join("\n");
        let has_unsafe = code.contains("unsafe {") || code.contains("unsafe fn") || code.contains("unsafe extern");
        assert!(!has_unsafe || UNSAFE.contains(&name.as_str()), "{name} contains unsafe code");
    }
}

#[test]
fn a_wrong_way_use_would_be_seen() {
    let text = "use crate::cli::main; // crate::report\nfn f() { crate::kernel::Kernel; }";
    assert_eq!(used_stages(text), vec![(1, "cli".to_owned()), (2, "kernel".to_owned())]);
    let grouped = "use crate::{\n    cli::{main, report},\n    kernel,\n};";
    assert_eq!(used_stages(grouped), vec![(1, "cli".to_owned()), (1, "kernel".to_owned())]);
}
