//! What is proved of a patch: statements that reduce to zero tests in the ring.

use super::closed::Elements;
use super::fraction::Fraction;
use super::meter::Step;
use super::polynomial::Polynomial;
use dashu_int::IBig;
use std::fmt;

/// A property that holds at every point of a patch.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub enum Fact {
    /// F = 0
    Orthogonal,
    /// E = G and F = 0
    Conformal,
    /// H = 0
    Minimal,
    /// K = 0
    Developable,
    /// dA is a constant: the map preserves area up to scale.
    ConstantElement,
    /// K is a constant other than 0.
    ConstantGauss,
    /// H is a constant other than 0.
    ConstantMean,
    /// H^2 = K, and not minimal: both principal curvatures are equal.
    Umbilic,
    /// dA > 0 at every point of the region, ends that belong to it included.
    Regular,
}

impl fmt::Display for Fact {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Fact::Orthogonal => "orthogonal",
            Fact::Conformal => "conformal",
            Fact::Minimal => "minimal",
            Fact::Developable => "developable",
            Fact::ConstantElement => "constant-dA",
            Fact::ConstantGauss => "constant-K",
            Fact::ConstantMean => "constant-H",
            Fact::Umbilic => "umbilic",
            Fact::Regular => "regular",
        })
    }
}

/// The facts of a patch, after its element was made; none that could not be proved, and none of a patch without area.
///
/// When the allowance runs out, what was found until then stands.
pub(super) fn facts(elements: &mut Elements<'_>) -> Vec<Fact> {
    let mut facts = Vec::new();
    // Exhausted: the rest stays open.
    let _ = collect(elements, &mut facts);
    facts.sort();
    facts
}

fn collect(elements: &mut Elements<'_>, facts: &mut Vec<Fact>) -> Step<()> {
    if elements.square.is_zero() || elements.content.is_zero() {
        return Ok(());
    }
    let [e, f, g] = elements.first.clone();
    if f.is_zero() {
        facts.push(Fact::Orthogonal);
        if elements.reader.ring.subtract(&e, &g)?.is_zero() {
            facts.push(Fact::Conformal);
        }
    }
    // W^2 = g^2 P
    let square = {
        let ring = &elements.reader.ring;
        let content = ring.multiply(&elements.content, &elements.content)?;
        ring.multiply(&content, &Fraction::whole(elements.square.clone()))?
    };
    if is_constant(elements, &square)? {
        facts.push(Fact::ConstantElement);
    }
    let [l, m, n] = elements.second()?;
    let ring = &elements.reader.ring;
    let gauss_top = ring.subtract(&ring.multiply(&l, &n)?, &ring.multiply(&m, &m)?)?;
    let two = Fraction::whole(Polynomial::constant(IBig::from(2)));
    let outer = ring.add(&ring.multiply(&e, &n)?, &ring.multiply(&g, &l)?)?;
    let mean_top = ring.subtract(&outer, &ring.multiply(&two, &ring.multiply(&f, &m)?)?)?;
    let minimal = mean_top.is_zero();
    if minimal {
        facts.push(Fact::Minimal);
    }
    if gauss_top.is_zero() {
        facts.push(Fact::Developable);
    } else {
        // K = (l n2 - m^2)/(g P)^2
        let root = ring.multiply(&elements.content, &Fraction::whole(elements.square.clone()))?;
        let below = ring.multiply(&root, &root)?;
        if let Some(gauss) = ring.divide(&gauss_top, &below)?
            && is_constant(elements, &gauss)?
        {
            facts.push(Fact::ConstantGauss);
        }
    }
    if !minimal {
        // H^2 = (E n2 - 2 F m + G l)^2/(4 g^4 P^3); it equals K where (...)^2 = 4 g^2 P (l n2 - m^2).
        let ring = &elements.reader.ring;
        let top = ring.multiply(&mean_top, &mean_top)?;
        let four = Fraction::whole(Polynomial::constant(IBig::from(4)));
        let umbilic = ring.multiply(&four, &ring.multiply(&square, &gauss_top)?)?;
        if ring.subtract(&top, &umbilic)?.is_zero() {
            facts.push(Fact::Umbilic);
        }
        let below = ring.multiply(&ring.multiply(&square, &square)?, &Fraction::whole(elements.square.clone()))?;
        let below = ring.multiply(&four, &below)?;
        let squared = ring.divide(&top, &below)?;
        // Where the normal turns around, H changes its sign although H^2 is constant.
        if let Some(squared) = squared
            && elements.unproved.is_empty()
            && is_constant(elements, &squared)?
        {
            facts.push(Fact::ConstantMean);
        }
    }
    Ok(())
}

/// Whether both partial derivatives are zero.
fn is_constant(elements: &Elements<'_>, value: &Fraction) -> Step<bool> {
    let (ring, graph) = (&elements.reader.ring, elements.reader.graph);
    for variable in elements.variables {
        match ring.derivative(value, variable, graph)? {
            Some(slope) if slope.is_zero() => {}
            _ => return Ok(false),
        }
    }
    Ok(true)
}
