//! Code memory is given back. In a test program of its own, because other tests would change the resident size.

use quadrel::expression::{Function, Graph};
use quadrel::kernel::{Kernel, Lanes, Program};

/// 10,000 kernels of each level of lanes, compiled and dropped, leave less than 20 MB behind and no more than a few
/// mappings: each wide one has a mapping of its own. Runs on Linux, where both can be read.
#[test]
fn code_memory_is_freed() {
    let resident = || -> Option<usize> {
        let text = std::fs::read_to_string("/proc/self/statm").ok()?;
        text.split_whitespace().nth(1)?.parse::<usize>().ok().map(|pages| pages * 4096)
    };
    let mappings = || std::fs::read_to_string("/proc/self/maps").map_or(0, |text| text.lines().count());
    let mut graph = Graph::new();
    let variables = [graph.new_symbol("u"), graph.new_symbol("v")];
    let (u, v) = (graph.symbol(variables[0]), graph.symbol(variables[1]));
    let product = graph.multiply(u, v);
    let root = graph.call(Function::Sqrt, product);
    let program = Program::new(&graph, &[root], variables, &[]).unwrap();
    for lanes in [Lanes::Two, Lanes::Four].into_iter().filter(|lanes| lanes.is_supported()) {
        let cycle = || drop(Kernel::compiled_for(program.clone(), lanes).unwrap());
        (0..200).for_each(|_| cycle());
        let Some(before) = resident() else { return };
        let mapped = mappings();
        (0..10_000).for_each(|_| cycle());
        let after = resident().unwrap();
        assert!(after < before + 20_000_000, "{lanes:?}: grew from {before} to {after} bytes");
        assert!(mappings() < mapped + 100, "{lanes:?}: grew from {mapped} to {} mappings", mappings());
    }
}

/// No mapping of a process that runs machine code of either level is writable and executable at once.
#[test]
fn code_is_never_writable_and_executable() {
    let mut graph = Graph::new();
    let variables = [graph.new_symbol("u"), graph.new_symbol("v")];
    let (u, v) = (graph.symbol(variables[0]), graph.symbol(variables[1]));
    let product = graph.multiply(u, v);
    let program = Program::new(&graph, &[product], variables, &[]).unwrap();
    let supported = [Lanes::Two, Lanes::Four].into_iter().filter(|lanes| lanes.is_supported());
    let kernels: Vec<Kernel> = supported.map(|lanes| Kernel::compiled_for(program.clone(), lanes).unwrap()).collect();
    let Ok(maps) = std::fs::read_to_string("/proc/self/maps") else { return };
    let open = maps.lines().find(|line| line.split_whitespace().nth(1).is_some_and(|rights| rights.starts_with("rwx")));
    assert_eq!(open, None);
    for kernel in kernels {
        let mut out = [0.0];
        kernel.evaluate(&[], &[2.0], &[3.0], &mut out);
        assert_eq!(out, [6.0]);
    }
}
