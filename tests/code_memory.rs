//! Code memory is given back. In a test program of its own, because other tests would change the resident size.

use quadrel::expression::{Function, Graph};
use quadrel::kernel::{Kernel, Program};

/// 10,000 kernels compiled and dropped leave less than 20 MB behind. Runs on Linux, where the resident size can be read.
#[test]
fn code_memory_is_freed() {
    let resident = || -> Option<usize> {
        let text = std::fs::read_to_string("/proc/self/statm").ok()?;
        text.split_whitespace().nth(1)?.parse::<usize>().ok().map(|pages| pages * 4096)
    };
    let mut graph = Graph::new();
    let variables = [graph.new_symbol("u"), graph.new_symbol("v")];
    let (u, v) = (graph.symbol(variables[0]), graph.symbol(variables[1]));
    let product = graph.multiply(u, v);
    let root = graph.call(Function::Sqrt, product);
    let program = Program::new(&graph, &[root], variables, &[]).unwrap();
    let cycle = || drop(Kernel::compiled(program.clone()).unwrap());
    (0..200).for_each(|_| cycle());
    let Some(before) = resident() else { return };
    (0..10_000).for_each(|_| cycle());
    let after = resident().unwrap();
    assert!(after < before + 20_000_000, "grew from {before} to {after} bytes");
}
