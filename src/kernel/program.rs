//! A formula as a straight line of instructions, the common form behind the interpreter and the machine code.
//!
//! Every instruction makes one value from earlier ones. Each value has a [`Stage`]: what it depends on. On a product
//! grid the stages before [`Stage::Mixed`] are computed once per run, per row or per column; only mixed instructions
//! stand in the inner loop. Multiply-add pairs are fused here, so that both engines round in the same places and give
//! the same bits.

use crate::expression::{BinaryFunction, ExpressionId, Function, Graph, Node, SymbolId};
use std::collections::HashMap;

/// Index of a value: the position of the instruction that makes it.
#[derive(Clone, Copy, PartialEq, Eq, Hash, PartialOrd, Ord, Debug)]
pub struct ValueId(pub(super) u32);

impl ValueId {
    /// The position in [`Program::instructions`].
    pub fn index(self) -> usize {
        self.0 as usize
    }
}

/// What a value depends on, from the least to the most often recomputed.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub enum Stage {
    /// On nothing.
    Constant,
    /// On parameters only.
    Parameter,
    /// On the first variable (and parameters).
    First,
    /// On the second variable (and parameters).
    Second,
    /// On both variables.
    Mixed,
}

impl Stage {
    fn join(self, other: Stage) -> Stage {
        match (self, other) {
            (Stage::First, Stage::Second) | (Stage::Second, Stage::First) => Stage::Mixed,
            _ => self.max(other),
        }
    }
}

/// One step. Truth values are 1.0 and 0.0, NaN where a condition is undefined.
#[derive(Clone, Copy, PartialEq, Debug)]
pub enum Instruction {
    /// A number.
    Constant(f64),
    /// The parameter at this position of the parameter slice.
    Parameter(u32),
    /// The first (0) or second (1) variable; in the mixed part of a program, a table of the second variable.
    Variable(u32),
    /// `-a`
    Negate(ValueId),
    /// `a + b`
    Add(ValueId, ValueId),
    /// `a - b`
    Subtract(ValueId, ValueId),
    /// `a * b`
    Multiply(ValueId, ValueId),
    /// `a / b`
    Divide(ValueId, ValueId),
    /// `a*b + c`, rounded once where the machine has the instruction, twice in both engines where it has not.
    MultiplyAdd(ValueId, ValueId, ValueId),
    /// `a*b - c`, likewise.
    MultiplySubtract(ValueId, ValueId, ValueId),
    /// `c - a*b`, likewise.
    NegateMultiplyAdd(ValueId, ValueId, ValueId),
    /// `sqrt(a)`
    SquareRoot(ValueId),
    /// `|a|`
    Magnitude(ValueId),
    /// The smaller of two values; NaN if either is.
    Minimum(ValueId, ValueId),
    /// The larger of two values; NaN if either is.
    Maximum(ValueId, ValueId),
    /// A function of the table other than square root and magnitude.
    Call(Function, ValueId),
    /// atan2 or hypot.
    Call2(BinaryFunction, ValueId, ValueId),
    /// `a ^ b` for exponents that are not small literals, by [`crate::expression::power`].
    Power(ValueId, ValueId),
    /// `a < b`; NaN if either is NaN.
    Less(ValueId, ValueId),
    /// `a <= b`; NaN if either is NaN.
    LessEqual(ValueId, ValueId),
    /// `a and b`; NaN if either is NaN.
    And(ValueId, ValueId),
    /// `a or b`; NaN if either is NaN.
    Or(ValueId, ValueId),
    /// `not a`; NaN if it is NaN.
    Not(ValueId),
    /// `b` where the condition `a` holds, `c` where it does not, NaN where it is NaN; a bitwise choice.
    Select(ValueId, ValueId, ValueId),
}

impl Instruction {
    /// The operands, in order.
    pub fn operands(&self) -> impl Iterator<Item = ValueId> + use<> {
        use Instruction::*;
        let operands = match *self {
            Constant(_) | Parameter(_) | Variable(_) => [None, None, None],
            Negate(a) | SquareRoot(a) | Magnitude(a) | Call(_, a) | Not(a) => [Some(a), None, None],
            Add(a, b)
            | Subtract(a, b)
            | Multiply(a, b)
            | Divide(a, b)
            | Minimum(a, b)
            | Maximum(a, b)
            | Call2(_, a, b)
            | Power(a, b)
            | Less(a, b)
            | LessEqual(a, b)
            | And(a, b)
            | Or(a, b) => [Some(a), Some(b), None],
            MultiplyAdd(a, b, c) | MultiplySubtract(a, b, c) | NegateMultiplyAdd(a, b, c) | Select(a, b, c) => {
                [Some(a), Some(b), Some(c)]
            }
        };
        operands.into_iter().flatten()
    }

    /// The cost of this step relative to an addition, to the nearest handful: elementary functions take some tens of
    /// additions, the special functions (series and recurrences) some hundreds.
    fn work(&self) -> u64 {
        match self {
            Instruction::Call(function, _) => match function {
                Function::Gamma
                | Function::LogGamma
                | Function::Polygamma(_)
                | Function::BesselJ(_)
                | Function::BesselY(_)
                | Function::EllipticK(_)
                | Function::EllipticE(_) => 300,
                _ => 20,
            },
            Instruction::Call2(..) => 20,
            Instruction::Power(..) => 40,
            Instruction::Divide(..) | Instruction::SquareRoot(_) => 4,
            _ => 1,
        }
    }
}

/// Why a formula cannot become a program or machine code.
#[derive(Clone, PartialEq, Debug, thiserror::Error)]
pub enum KernelError {
    /// A symbol is neither a variable nor a parameter.
    #[error("`{0}` has no value in this formula")]
    UnknownSymbol(String),
    /// The formula is larger than [`Graph::MAXIMUM_FORMULA_NODES`].
    #[error("the formula has {0} nodes, more than the {limit} that are evaluated", limit = Graph::MAXIMUM_FORMULA_NODES)]
    TooLarge(usize),
    /// The formula is larger than what is worth compiling; the interpreter takes it.
    #[error("the formula has {0} instructions, too many to compile")]
    TooLargeToCompile(usize),
    /// The machine has no vectors of so many lanes.
    #[error("this machine has no vectors of {0} lanes")]
    UnsupportedLanes(usize),
    /// The code generator refused.
    #[error("code generation failed: {0}")]
    CodeGeneration(String),
}

/// A formula, or several that share their parts, as a straight line of instructions.
#[derive(Clone, PartialEq, Debug)]
pub struct Program {
    instructions: Vec<Instruction>,
    stages: Vec<Stage>,
    outputs: Vec<ValueId>,
    parameter_count: usize,
}

impl Program {
    /// The program that computes `outputs` from two variables and the parameters.
    ///
    /// # Errors
    /// If a symbol is neither a variable nor a parameter, or the formula is too large.
    pub fn new(
        graph: &Graph,
        outputs: &[ExpressionId],
        variables: [SymbolId; 2],
        parameters: &[SymbolId],
    ) -> Result<Self, KernelError> {
        let nodes = graph.reachable(outputs);
        if nodes.len() > Graph::MAXIMUM_FORMULA_NODES {
            return Err(KernelError::TooLarge(nodes.len()));
        }
        let mut builder = Builder { instructions: Vec::new(), known: HashMap::new() };
        let mut values: HashMap<ExpressionId, ValueId> = HashMap::with_capacity(nodes.len());
        for id in nodes {
            let value = match graph.node(id) {
                Node::Symbol(symbol) => {
                    let instruction = if let Some(position) = variables.iter().position(|&v| v == symbol) {
                        Instruction::Variable(position as u32)
                    } else if let Some(position) = parameters.iter().position(|&p| p == symbol) {
                        Instruction::Parameter(position as u32)
                    } else {
                        return Err(KernelError::UnknownSymbol(graph.symbol_name(symbol).to_owned()));
                    };
                    builder.push(instruction)
                }
                node => builder.lower(graph, node, |child| values[&child]),
            };
            values.insert(id, value);
        }
        let outputs: Vec<ValueId> = outputs.iter().map(|output| values[output]).collect();
        let fused = fuse(&builder.instructions, &outputs);
        Ok(prune(fused, outputs, parameters.len()))
    }

    /// The part of the program that computes `outputs`.
    pub(super) fn restricted(&self, outputs: Vec<ValueId>) -> Program {
        prune(self.instructions.clone(), outputs, self.parameter_count)
    }

    /// What stands in the inner loop of a product grid, as a program of its own.
    pub(super) fn mixed_part(&self) -> MixedPart {
        let mut needed = vec![false; self.len()];
        for (index, instruction) in self.instructions.iter().enumerate() {
            if self.stages[index] == Stage::Mixed {
                instruction.operands().for_each(|operand| needed[operand.index()] = true);
            }
        }
        self.outputs.iter().for_each(|output| needed[output.index()] = true);
        let (mut row_values, mut table_values) = (Vec::new(), Vec::new());
        let mut instructions = self.instructions.clone();
        for (index, instruction) in instructions.iter_mut().enumerate().filter(|&(index, _)| needed[index]) {
            let value = ValueId(index as u32);
            match self.stages[index] {
                Stage::Parameter | Stage::First => {
                    *instruction = Instruction::Parameter(row_values.len() as u32);
                    row_values.push(value);
                }
                Stage::Second => {
                    *instruction = Instruction::Variable(table_values.len() as u32);
                    table_values.push(value);
                }
                Stage::Constant | Stage::Mixed => {}
            }
        }
        MixedPart {
            program: prune(instructions, self.outputs.clone(), row_values.len()),
            row_values: self.restricted(row_values),
            table_values: self.restricted(table_values),
        }
    }

    /// The steps, operands before users.
    pub fn instructions(&self) -> &[Instruction] {
        &self.instructions
    }

    /// What the value of each step depends on.
    pub fn stages(&self) -> &[Stage] {
        &self.stages
    }

    /// The values asked for.
    pub fn outputs(&self) -> &[ValueId] {
        &self.outputs
    }

    /// Length of the parameter slice.
    pub fn parameter_count(&self) -> usize {
        self.parameter_count
    }

    /// Number of steps.
    pub fn len(&self) -> usize {
        self.instructions.len()
    }

    /// What one evaluation costs, counted in additions: a measure of the formula, not of the machine.
    pub fn work(&self) -> u64 {
        self.instructions.iter().map(Instruction::work).sum()
    }

    /// Whether there is no step.
    pub fn is_empty(&self) -> bool {
        self.instructions.is_empty()
    }

    /// Number of steps that depend on both variables: the inner loop of a product grid.
    pub fn mixed_count(&self) -> usize {
        self.stages.iter().filter(|stage| **stage == Stage::Mixed).count()
    }
}

/// A program cut for a product grid.
#[derive(Clone, PartialEq, Debug)]
pub(super) struct MixedPart {
    /// The inner loop: its parameters are the outputs of `row_values`, its variables those of `table_values`.
    pub(super) program: Program,
    /// Values that are fixed along a row.
    pub(super) row_values: Program,
    /// Values that depend on the second variable only.
    pub(super) table_values: Program,
}

/// Instructions with equal ones shared.
struct Builder {
    instructions: Vec<Instruction>,
    known: HashMap<(std::mem::Discriminant<Instruction>, u64, [u32; 3]), Vec<ValueId>>,
}

impl Builder {
    fn push(&mut self, instruction: Instruction) -> ValueId {
        let mut operands = [u32::MAX; 3];
        for (place, operand) in operands.iter_mut().zip(instruction.operands()) {
            *place = operand.0;
        }
        let payload = match instruction {
            Instruction::Constant(value) => value.to_bits(),
            Instruction::Parameter(position) => u64::from(position),
            Instruction::Variable(position) => u64::from(position),
            _ => 0,
        };
        let same = self.known.entry((std::mem::discriminant(&instruction), payload, operands)).or_default();
        let bits_equal = |a: &Instruction| match (a, &instruction) {
            (Instruction::Constant(x), Instruction::Constant(y)) => x.to_bits() == y.to_bits(),
            (a, b) => *a == *b,
        };
        if let Some(&known) = same.iter().find(|known| bits_equal(&self.instructions[known.index()])) {
            return known;
        }
        let id = ValueId(self.instructions.len() as u32);
        same.push(id);
        self.instructions.push(instruction);
        id
    }

    fn lower(&mut self, graph: &Graph, node: Node, at: impl Fn(ExpressionId) -> ValueId) -> ValueId {
        let instruction = match node {
            Node::Number(number) => Instruction::Constant(graph.number_value(number).to_f64()),
            Node::Pi => Instruction::Constant(std::f64::consts::PI),
            Node::Truth(truth) => Instruction::Constant(if truth { 1.0 } else { 0.0 }),
            Node::Symbol(_) => unreachable!("symbols are resolved by the caller"),
            Node::Negate(a) => Instruction::Negate(at(a)),
            Node::Add(a, b) => Instruction::Add(at(a), at(b)),
            Node::Subtract(a, b) => Instruction::Subtract(at(a), at(b)),
            Node::Multiply(a, b) => Instruction::Multiply(at(a), at(b)),
            Node::Divide(a, b) => Instruction::Divide(at(a), at(b)),
            Node::Power(a, b) => {
                return match graph.as_number(b).map(|exponent| exponent.to_f64()) {
                    Some(exponent) => self.literal_power(at(a), exponent),
                    None => self.push(Instruction::Power(at(a), at(b))),
                };
            }
            Node::Call(Function::Sqrt, a) => Instruction::SquareRoot(at(a)),
            Node::Call(Function::Abs, a) => Instruction::Magnitude(at(a)),
            Node::Call(function, a) => Instruction::Call(function, at(a)),
            Node::Call2(BinaryFunction::Min, a, b) => Instruction::Minimum(at(a), at(b)),
            Node::Call2(BinaryFunction::Max, a, b) => Instruction::Maximum(at(a), at(b)),
            Node::Call2(function, a, b) => Instruction::Call2(function, at(a), at(b)),
            Node::Less(a, b) => Instruction::Less(at(a), at(b)),
            Node::LessEqual(a, b) => Instruction::LessEqual(at(a), at(b)),
            Node::And(a, b) => Instruction::And(at(a), at(b)),
            Node::Or(a, b) => Instruction::Or(at(a), at(b)),
            Node::Not(a) => Instruction::Not(at(a)),
            Node::Select(c, a, b) => Instruction::Select(at(c), at(a), at(b)),
        };
        self.push(instruction)
    }

    /// `base ^ exponent` for a literal exponent, with the multiplications of [`crate::expression::power`].
    fn literal_power(&mut self, base: ValueId, exponent: f64) -> ValueId {
        let whole = exponent.fract() == 0.0 && exponent.abs() <= 64.0;
        let half = !whole && (2.0 * exponent).fract() == 0.0 && exponent.abs() <= 32.0;
        if !whole && !half {
            let exponent = self.push(Instruction::Constant(exponent));
            return self.push(Instruction::Power(base, exponent));
        }
        let n = exponent.abs() as u32;
        let product = match (n, half) {
            (0, false) => self.push(Instruction::Constant(1.0)),
            (0, true) => self.push(Instruction::SquareRoot(base)),
            _ => {
                let mut product = base;
                for bit in (0..n.ilog2()).rev() {
                    product = self.push(Instruction::Multiply(product, product));
                    if n & (1 << bit) != 0 {
                        product = self.push(Instruction::Multiply(product, base));
                    }
                }
                if half {
                    let root = self.push(Instruction::SquareRoot(base));
                    product = self.push(Instruction::Multiply(root, product));
                }
                product
            }
        };
        if exponent < 0.0 {
            let one = self.push(Instruction::Constant(1.0));
            self.push(Instruction::Divide(one, product))
        } else {
            product
        }
    }
}

/// Sums and differences with a product that nothing else uses become one fused instruction each.
///
/// Only products of the sum's own stage are fused: a product that a table or a row could hold stays outside the loop.
fn fuse(instructions: &[Instruction], outputs: &[ValueId]) -> Vec<Instruction> {
    let stages = stages_of(instructions);
    let mut uses = vec![0u32; instructions.len()];
    for operand in instructions.iter().flat_map(Instruction::operands).chain(outputs.iter().copied()) {
        uses[operand.index()] += 1;
    }
    let product = |value: ValueId, stage: Stage| match instructions[value.index()] {
        Instruction::Multiply(a, b) if uses[value.index()] == 1 && stages[value.index()] == stage => Some((a, b)),
        _ => None,
    };
    let fused = |(index, instruction): (usize, &Instruction)| {
        let stage = stages[index];
        match *instruction {
            Instruction::Add(a, b) => match (product(a, stage), product(b, stage)) {
                (_, Some((x, y))) => Instruction::MultiplyAdd(x, y, a),
                (Some((x, y)), None) => Instruction::MultiplyAdd(x, y, b),
                (None, None) => *instruction,
            },
            Instruction::Subtract(a, b) => match (product(a, stage), product(b, stage)) {
                (_, Some((x, y))) => Instruction::NegateMultiplyAdd(x, y, a),
                (Some((x, y)), None) => Instruction::MultiplySubtract(x, y, b),
                (None, None) => *instruction,
            },
            other => other,
        }
    };
    instructions.iter().enumerate().map(fused).collect()
}

fn stages_of(instructions: &[Instruction]) -> Vec<Stage> {
    let mut stages: Vec<Stage> = Vec::with_capacity(instructions.len());
    for instruction in instructions {
        let own = match instruction {
            Instruction::Parameter(_) => Stage::Parameter,
            Instruction::Variable(0) => Stage::First,
            Instruction::Variable(_) => Stage::Second,
            _ => Stage::Constant,
        };
        stages.push(instruction.operands().fold(own, |stage, operand| stage.join(stages[operand.index()])));
    }
    stages
}

/// Drops the instructions that nothing uses, and renumbers depth-first from the outputs so that values live briefly.
fn prune(instructions: Vec<Instruction>, outputs: Vec<ValueId>, parameter_count: usize) -> Program {
    let mut new_ids: Vec<Option<ValueId>> = vec![None; instructions.len()];
    let mut ordered: Vec<Instruction> = Vec::new();
    let mut todo: Vec<ValueId> = outputs.iter().rev().copied().collect();
    while let Some(&value) = todo.last() {
        if new_ids[value.index()].is_some() {
            todo.pop();
            continue;
        }
        let instruction = instructions[value.index()];
        let waiting = todo.len();
        todo.extend(instruction.operands().filter(|operand| new_ids[operand.index()].is_none()));
        // Operands are visited first to last.
        todo[waiting..].reverse();
        if todo.len() == waiting {
            todo.pop();
            new_ids[value.index()] = Some(ValueId(ordered.len() as u32));
            ordered.push(renumber(instruction, |operand| new_ids[operand.index()].expect("operands come first")));
        }
    }
    let outputs = outputs.iter().map(|output| new_ids[output.index()].expect("outputs were visited")).collect();
    let stages = stages_of(&ordered);
    Program { instructions: ordered, stages, outputs, parameter_count }
}

fn renumber(instruction: Instruction, at: impl Fn(ValueId) -> ValueId) -> Instruction {
    use Instruction::*;
    match instruction {
        Constant(_) | Parameter(_) | Variable(_) => instruction,
        Negate(a) => Negate(at(a)),
        SquareRoot(a) => SquareRoot(at(a)),
        Magnitude(a) => Magnitude(at(a)),
        Call(f, a) => Call(f, at(a)),
        Not(a) => Not(at(a)),
        Add(a, b) => Add(at(a), at(b)),
        Subtract(a, b) => Subtract(at(a), at(b)),
        Multiply(a, b) => Multiply(at(a), at(b)),
        Divide(a, b) => Divide(at(a), at(b)),
        Minimum(a, b) => Minimum(at(a), at(b)),
        Maximum(a, b) => Maximum(at(a), at(b)),
        Call2(f, a, b) => Call2(f, at(a), at(b)),
        Power(a, b) => Power(at(a), at(b)),
        Less(a, b) => Less(at(a), at(b)),
        LessEqual(a, b) => LessEqual(at(a), at(b)),
        And(a, b) => And(at(a), at(b)),
        Or(a, b) => Or(at(a), at(b)),
        MultiplyAdd(a, b, c) => MultiplyAdd(at(a), at(b), at(c)),
        MultiplySubtract(a, b, c) => MultiplySubtract(at(a), at(b), at(c)),
        NegateMultiplyAdd(a, b, c) => NegateMultiplyAdd(at(a), at(b), at(c)),
        Select(a, b, c) => Select(at(a), at(b), at(c)),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn stages_follow_the_variables() {
        let mut g = Graph::new();
        let (su, sv, sp) = (g.new_symbol("u"), g.new_symbol("v"), g.new_symbol("p"));
        let (u, v, p) = (g.symbol(su), g.symbol(sv), g.symbol(sp));
        let sine = g.call(Function::Sin, u);
        let row = g.multiply(sine, p);
        let mixed = g.multiply(row, v);
        let program = Program::new(&g, &[mixed], [su, sv], &[sp]).unwrap();
        assert_eq!(program.mixed_count(), 1);
        assert_eq!(program.stages()[program.outputs()[0].index()], Stage::Mixed);
        assert!(
            matches!(Program::new(&g, &[mixed], [su, sv], &[]), Err(KernelError::UnknownSymbol(name)) if name == "p")
        );
    }

    #[test]
    fn products_are_fused_into_sums() {
        let mut g = Graph::new();
        let (su, sv) = (g.new_symbol("u"), g.new_symbol("v"));
        let (u, v) = (g.symbol(su), g.symbol(sv));
        let product = g.multiply(u, v);
        let sum = g.add(product, u);
        let program = Program::new(&g, &[sum], [su, sv], &[]).unwrap();
        assert!(program.instructions().iter().any(|i| matches!(i, Instruction::MultiplyAdd(..))));
        assert_eq!(program.len(), 3);
    }
}
