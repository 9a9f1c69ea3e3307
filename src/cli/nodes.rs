//! `quadrel nodes`

use super::arguments::{NodesOptions, RuleOption};
use super::{Exit, Failure, choose_patch, load, output, set_text};
use crate::integrals::{IntegralError, NodeRow, NodesError, SurfaceNodes};
use crate::quadrature::gauss_legendre;
use crate::report::{COLUMNS, CsvTable, NpyTable, Stamp, TableFormat, write_whole};
use serde_json::json;
use std::io::{self, Write};
use std::path::Path;

/// Memory for one table and the nodes of its rule.
const MEMORY_BYTES: u64 = 2 << 30;

pub(super) fn run(options: &NodesOptions) -> Result<Exit, Failure> {
    let (model, bindings) = load(&options.sheet, &options.set)?;
    let chain = model.chains.iter().find(|chain| options.patch.as_ref() == Some(&chain.name));
    let (name, terms) = match chain {
        Some(chain) => (chain.name.clone(), chain.chain.terms.clone()),
        None => {
            let patch = choose_patch(&model, options.patch.as_deref())?;
            (model.patches[patch.0].name.clone(), vec![(1, patch)])
        }
    };
    let (first, second) = options.grid;
    let rows = (first as u64).checked_mul(second as u64).and_then(|rows| rows.checked_mul(terms.len() as u64));
    let bytes = rows.and_then(|rows| rows.checked_mul(8 * (COLUMNS.len() as u64 + 1)));
    let rows = match (rows, bytes) {
        (Some(rows), Some(bytes)) if bytes <= 64 * MEMORY_BYTES && 16 * (first + second) as u64 <= MEMORY_BYTES => {
            rows as usize
        }
        _ => {
            return Err(Failure::Usage(format!(
                "--grid {first}x{second} is too large: a table has at most {} bytes",
                64 * MEMORY_BYTES
            )));
        }
    };
    if options.rule == RuleOption::Gauss && first.max(second) > 20_000 {
        return Err(Failure::Usage("--rule gauss takes at most 20000 nodes along a variable".to_owned()));
    }
    if options.output == Path::new("-") && rows as u64 * 256 > MEMORY_BYTES {
        return Err(Failure::Usage(format!(
            "--grid {first}x{second} is too large for standard output: write a file with -o"
        )));
    }
    let rule = |n: usize| match options.rule {
        RuleOption::Midpoint => {
            ((0..n).map(|i| (2 * i + 1) as f64 / n as f64 - 1.0).collect(), vec![2.0 / n as f64; n])
        }
        RuleOption::Gauss => gauss_legendre(n),
    };
    let word = if options.rule == RuleOption::Gauss { "gauss" } else { "midpoint" };
    let stamp = Stamp::new(
        &model.source.text,
        vec![
            (if chain.is_some() { "chain" } else { "patch" }, json!(name)),
            ("grid", json!(format!("{first}x{second}"))),
            ("rule", json!(word)),
            ("set", json!(set_text(&model, &bindings, &options.set))),
        ],
    );
    // The patches of a chain may have different variables.
    let variables = match terms[..] {
        [(_, patch)] if chain.is_none() => {
            model.patches[patch.0].variables.map(|variable| model.graph.symbol_name(variable).to_owned())
        }
        _ => ["1", "2"].map(str::to_owned),
    };
    let patches = || terms.iter().map(|(_, patch)| model.patches[patch.0].name.clone()).collect();
    let extension = options.output.extension().and_then(|extension| extension.to_str()).unwrap_or("").to_lowercase();
    let to_stdout = options.output == Path::new("-");
    let format: Box<dyn TableFormat> = match extension.as_str() {
        "npy" => Box::new(NpyTable { numbered: chain.is_some() }),
        "csv" => Box::new(CsvTable { stamp, variables, patches: chain.map(|_| patches()) }),
        _ if to_stdout => Box::new(CsvTable { stamp, variables, patches: chain.map(|_| patches()) }),
        _ => {
            return Err(Failure::Usage(format!(
                "{}: the name of the table must end in .npy or .csv",
                options.output.display()
            )));
        }
    };
    let mut failed: Option<IntegralError> = None;
    let mut write = |out: &mut dyn Write| -> io::Result<()> {
        format.header(out, rows)?;
        let (first, second) = (rule(first), rule(second));
        for (index, &(coefficient, patch)) in terms.iter().enumerate() {
            let mut deliver = |row: &NodeRow| {
                let mut row = *row;
                row[COLUMNS.len() - 1] *= coefficient as f64;
                format.row(out, index, &row)
            };
            SurfaceNodes::new(&model, &bindings, patch)
                .map_err(NodesError::Surface)
                .and_then(|nodes| nodes.for_each(&first, &second, &mut deliver))
                .map_err(|error| match error {
                    NodesError::Output(error) => error,
                    NodesError::Surface(error) => {
                        failed = Some(error.clone());
                        io::Error::other(error)
                    }
                })?;
        }
        Ok(())
    };
    let result = if to_stdout {
        let mut text = Vec::new();
        let result = write(&mut text);
        if result.is_ok() {
            output::print(&String::from_utf8_lossy(&text));
        }
        result
    } else {
        write_whole(&options.output, |out| write(out))
    };
    if let Some(error) = failed {
        return Err(error.into());
    }
    result.map_err(|error| Failure::Files(format!("{}: {error}", options.output.display())))?;
    Ok(Exit::Reached)
}
