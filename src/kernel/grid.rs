//! Sums over product grids: what depends on one variable only is tabled once, the inner loop does mixed arithmetic.

use super::interpreter::{Interpreter, run};
use super::kernel::Kernel;
use super::machine_code::{Buffers, Code, Lanes};
use super::plan::{Sink, TURN};
use super::program::{KernelError, MixedPart, Program, Stage, ValueId};
use rayon::prelude::*;

/// Rows that are summed by one thread at a time; the shape of the sum does not depend on how many threads there are.
const ROWS: usize = 16;

/// Points below which threads do not pay.
const PARALLEL_POINTS: usize = 200_000;

/// Code for one row of a grid: the first variable is fixed, the second runs.
#[derive(Debug)]
pub(super) struct RowCode {
    code: Code,
    /// Computes the uniform values of a row from the first variable.
    row_values: Program,
    /// Computes the tables from the second variable.
    table_values: Program,
}

impl RowCode {
    pub(super) fn compile(program: &Program, lanes: Lanes) -> Result<Self, KernelError> {
        let stage = |value: ValueId| program.stages()[value.index()];
        let body: Vec<ValueId> = (0..program.len())
            .map(|index| ValueId(index as u32))
            .filter(|&value| stage(value) == Stage::Mixed)
            .collect();
        let is_table = |value: ValueId| stage(value) == Stage::Second;
        let code = Code::compile(program, &body, program.outputs(), is_table, Sink::WeightedSum, lanes)?;
        Ok(Self {
            row_values: program.restricted(code.uniforms().to_vec()),
            table_values: program.restricted(code.arrays().to_vec()),
            code,
        })
    }
}

/// All outputs of a program at a batch of points, output by output.
fn tabulate(program: &Program, parameters: &[f64], u: &[f64], v: &[f64]) -> Vec<Vec<f64>> {
    let mut tables = vec![vec![0.0; u.len()]; program.outputs().len()];
    run(program, parameters, u, v, &mut |output, start, values| {
        tables[output][start..start + values.len()].copy_from_slice(values);
    });
    tables
}

impl Kernel {
    /// Sums over a product grid: sum over i, j of `wu[i] * wv[j] * f_k(u[i], v[j])` for each output k.
    ///
    /// The order of summation is fixed: four partial sums along a row, rows one after the other in blocks of 16, blocks in
    /// order with compensation. So the bits depend neither on the number of threads nor on the engine or its lanes. A sum is NaN where
    /// a value is not finite.
    ///
    /// # Panics
    /// If weights and nodes differ in number, or parameter values are missing.
    pub fn sum_grid(&self, parameters: &[f64], u: &[f64], wu: &[f64], v: &[f64], wv: &[f64]) -> Vec<f64> {
        assert_eq!(u.len(), wu.len(), "a weight for each value of the first variable");
        assert_eq!(v.len(), wv.len(), "a weight for each value of the second variable");
        assert_eq!(parameters.len(), self.program().parameter_count(), "one value for each parameter");
        let outputs = self.program().outputs().len();
        if u.is_empty() || v.is_empty() {
            return vec![0.0; outputs];
        }
        let rows: Box<dyn Fn(usize) -> Vec<f64> + Sync + '_> = match self.rows() {
            Some(code) => {
                let grid = CompiledGrid::new(code, parameters, u, v, wv);
                Box::new(move |block| grid.block(block, wu, outputs))
            }
            None => {
                let grid = InterpretedGrid::new(self.program().mixed_part(), parameters, u, v, wv);
                Box::new(move |block| grid.block(block, wu))
            }
        };
        let blocks = u.len().div_ceil(ROWS);
        let sums: Vec<Vec<f64>> = if u.len().saturating_mul(v.len()) >= PARALLEL_POINTS {
            (0..blocks).into_par_iter().map(&rows).collect()
        } else {
            (0..blocks).map(&rows).collect()
        };
        (0..outputs).map(|output| compensated(sums.iter().map(|sum| sum[output]))).collect()
    }
}

/// The four partial sums of a row.
fn row_sum(partial: &[f64; TURN]) -> f64 {
    (partial[0] + partial[1]) + (partial[2] + partial[3])
}

/// A grid whose tables are filled, for the interpreter.
struct InterpretedGrid {
    mixed: Program,
    /// Parameters of the inner loop: one list for each, as long as the first variable.
    row_values: Vec<Vec<f64>>,
    tables: Vec<Vec<f64>>,
    weights: Vec<f64>,
}

impl InterpretedGrid {
    fn new(part: MixedPart, parameters: &[f64], u: &[f64], v: &[f64], wv: &[f64]) -> Self {
        Self {
            row_values: tabulate(&part.row_values, parameters, u, &vec![0.0; u.len()]),
            tables: tabulate(&part.table_values, parameters, &vec![0.0; v.len()], v),
            weights: wv.to_vec(),
            mixed: part.program,
        }
    }

    fn block(&self, block: usize, wu: &[f64]) -> Vec<f64> {
        let outputs = self.mixed.outputs().len();
        let interpreter = Interpreter::new(&self.mixed);
        let tables: Vec<&[f64]> = self.tables.iter().map(Vec::as_slice).collect();
        let mut totals = vec![0.0; outputs];
        for (row, &row_weight) in wu.iter().enumerate().skip(block * ROWS).take(ROWS) {
            let row_values: Vec<f64> = self.row_values.iter().map(|values| values[row]).collect();
            let mut partial = vec![[0.0; TURN]; outputs];
            interpreter.run(&row_values, &tables, self.weights.len(), &mut |output, start, values| {
                for (i, (value, weight)) in values.iter().zip(&self.weights[start..]).enumerate() {
                    partial[output][(start + i) % TURN] += value * weight;
                }
            });
            for (total, partial) in totals.iter_mut().zip(&partial) {
                *total += row_weight * row_sum(partial);
            }
        }
        totals
    }
}

/// A grid whose tables are filled, for machine code.
struct CompiledGrid<'a> {
    code: &'a RowCode,
    /// Uniform values: one list for each value, as long as the first variable.
    row_values: Vec<Vec<f64>>,
    /// Tables and weights, padded to whole turns.
    tables: Vec<Vec<f64>>,
    weights: Vec<f64>,
}

impl<'a> CompiledGrid<'a> {
    fn new(code: &'a RowCode, parameters: &[f64], u: &[f64], v: &[f64], wv: &[f64]) -> Self {
        let size = v.len().next_multiple_of(TURN);
        // The last point, with weight 0, fills up the last turn.
        let mut padded = v.to_vec();
        padded.resize(size, v[v.len() - 1]);
        let mut weights = wv.to_vec();
        weights.resize(size, 0.0);
        Self {
            row_values: tabulate(&code.row_values, parameters, u, &vec![0.0; u.len()]),
            tables: tabulate(&code.table_values, parameters, &vec![0.0; size], &padded),
            weights,
            code,
        }
    }

    fn block(&self, block: usize, wu: &[f64], outputs: usize) -> Vec<f64> {
        let code = &self.code.code;
        let mut buffers: Buffers = code.buffers();
        let mut totals = vec![0.0; outputs];
        let mut partial = vec![0.0; TURN * outputs];
        // Nothing is allocated for a row: that would cost as much as a tenth of its points.
        let size = self.weights.len();
        let columns: Vec<(Vec<&[f64]>, &[f64])> = (0..size)
            .step_by(code.block())
            .map(|start| start..(start + code.block()).min(size))
            .map(|range| {
                (self.tables.iter().map(|table| &table[range.clone()]).collect(), &self.weights[range.clone()])
            })
            .collect();
        for (row, &row_weight) in wu.iter().enumerate().skip(block * ROWS).take(ROWS) {
            let mut next = 0;
            code.set_uniforms(&mut buffers, |_| {
                next += 1;
                self.row_values[next - 1][row]
            });
            partial.fill(0.0);
            for (arrays, weights) in &columns {
                code.run(&mut buffers, arrays, weights, &mut partial, TURN);
            }
            for (total, partial) in totals.iter_mut().zip(partial.as_chunks::<TURN>().0) {
                *total += row_weight * row_sum(partial);
            }
        }
        totals
    }
}

/// Neumaier's compensated sum.
fn compensated(terms: impl Iterator<Item = f64>) -> f64 {
    let (mut sum, mut rest) = (0.0_f64, 0.0_f64);
    for term in terms {
        let next = sum + term;
        rest += if sum.abs() >= term.abs() { (sum - next) + term } else { (term - next) + sum };
        sum = next;
    }
    sum + rest
}
