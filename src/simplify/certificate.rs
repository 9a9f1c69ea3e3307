//! The proof that a printed form is what it claims to be.
//!
//! The text is read back by a routine of its own and becomes an element of a fresh ring, together with the tangents and
//! second derivatives as the calculus gives them; with W^2 = EG - F^2 and N = phi_u x phi_v from the definitions,
//!
//!   dA^2 - W^2,   n dA - N,   L dA - phi_uu.N,   K W^4 - (l n2 - m^2),   2 H W^2 dA - (E n2 - 2 F m + G l)
//!
//! must reduce to the zero polynomial. That dA is not negative was proved factor by factor when it was written.

use super::closed::{Formulas, dot};
use super::form::Form;
use super::forms::Quantity;
use super::fraction::Fraction;
use super::meter::{Exhausted, Step};
use super::parse_back::parse_back;
use super::polynomial::Polynomial;
use super::read::{Arguments, Purpose, Reader};
use super::region;
use super::ring::Ring;
use super::sign::sign;
use crate::expression::{ExpressionId, Graph, SymbolId};
use crate::language::{Model, Patch};
use dashu_int::IBig;
use std::collections::BTreeMap;

/// What became of a form.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum Proof {
    /// Proved equal.
    Equal,
    /// The difference did not reduce to zero.
    Failed,
    /// The allowance of steps ran out.
    Open,
}

/// What a proof starts from.
pub(super) struct Certificate<'a> {
    model: &'a Model,
    patch: &'a Patch,
    formulas: &'a Formulas,
    graph: Graph,
}

impl<'a> Certificate<'a> {
    pub fn new(model: &'a Model, patch: &'a Patch, formulas: &'a Formulas, graph: &Graph) -> Self {
        Self { model, patch, formulas, graph: graph.clone() }
    }

    /// What became of each form.
    pub fn check(mut self, forms: &BTreeMap<Quantity, Form>, conditions: &[String]) -> BTreeMap<Quantity, Proof> {
        let names = names(self.model, self.patch);
        let mut texts: Vec<(Quantity, ExpressionId)> = Vec::new();
        for (quantity, form) in forms {
            if let Some(formula) = parse_back(&mut self.graph, &form.text(), &names) {
                texts.push((*quantity, formula));
            }
        }
        let mut proofs: BTreeMap<Quantity, Proof> = forms.keys().map(|&quantity| (quantity, Proof::Open)).collect();
        for manner in [Arguments::Split, Arguments::Whole, Arguments::Written] {
            let open = |quantity: &Quantity| proofs[quantity] != Proof::Equal;
            if !texts.iter().any(|(quantity, _)| open(quantity)) {
                break;
            }
            // The others need the element.
            let left: Vec<_> =
                texts.iter().filter(|(own, _)| open(own) || *own == Quantity::Element).copied().collect();
            for (quantity, equal) in self.check_in(manner, &left, !conditions.is_empty()).unwrap_or_default() {
                let proof = proofs.get_mut(&quantity).expect("only what was asked for");
                if equal {
                    *proof = Proof::Equal;
                } else if *proof == Proof::Open {
                    *proof = Proof::Failed;
                }
            }
        }
        proofs
    }

    /// `conditional`: the forms hold where signs are as they are for the values of the sheet.
    fn check_in(
        &self,
        manner: Arguments,
        texts: &[(Quantity, ExpressionId)],
        conditional: bool,
    ) -> Step<Vec<(Quantity, bool)>> {
        let mut roots: Vec<ExpressionId> = texts.iter().map(|(_, formula)| *formula).collect();
        roots.extend(self.formulas.tangents.iter().chain(&self.formulas.second).flatten());
        roots.extend(region::formulas(self.model, self.patch));
        let mut reader = Reader::new(&self.graph, &roots, manner, Purpose::Proving)?;
        let mut ranges = region::read(&mut reader, self.model, self.patch);
        if conditional {
            ranges = region::at_the_values(&mut reader, self.model, &ranges)?;
        }
        let prove = |ring: &Ring, polynomial: &Polynomial| sign(ring, &self.graph, &ranges, polynomial);
        let mut vector = |formulas: &[ExpressionId; 3]| -> Step<[Fraction; 3]> {
            Ok([
                reader.read(formulas[0], &prove)?,
                reader.read(formulas[1], &prove)?,
                reader.read(formulas[2], &prove)?,
            ])
        };
        let [u, v] = [vector(&self.formulas.tangents[0])?, vector(&self.formulas.tangents[1])?];
        let needs_second = texts.iter().any(|(quantity, _)| {
            matches!(quantity, Quantity::L | Quantity::M | Quantity::N2 | Quantity::Gauss | Quantity::Mean)
        });
        let mut second = Vec::new();
        if needs_second {
            for formulas in &self.formulas.second {
                second.push(vector(formulas)?);
            }
        }
        let mut values = BTreeMap::new();
        for (quantity, formula) in texts {
            if let Ok(value) = reader.read(*formula, &prove) {
                values.insert(*quantity, value);
            }
        }
        let ring = &reader.ring;
        let proof = Definitions::new(ring, u, v, second, self.patch.orientation < 0)?;
        let element = values.get(&Quantity::Element).cloned();
        let mut results = Vec::new();
        for (quantity, value) in &values {
            if let Ok(equal) = proof.holds(ring, *quantity, value, element.as_ref()) {
                results.push((*quantity, equal));
            }
        }
        Ok(results)
    }
}

/// Symbols by name: a variable hides a parameter, as in the sheet.
pub(super) fn names(model: &Model, patch: &Patch) -> Vec<(String, SymbolId)> {
    let variables = patch.variables.iter().map(|&symbol| (model.graph.symbol_name(symbol).to_owned(), symbol));
    let parameters = model.parameters.iter().map(|parameter| (parameter.name.clone(), parameter.symbol));
    variables.chain(parameters).collect()
}

/// The definitions, straight from tangents and second derivatives.
struct Definitions {
    tangents: [[Fraction; 3]; 2],
    first: [Fraction; 3],
    /// EG - F^2
    square: Fraction,
    normal: [Fraction; 3],
    /// phi_uu.N, phi_uv.N, phi_vv.N; empty if nothing needs them.
    along: Vec<Fraction>,
}

impl Definitions {
    fn new(ring: &Ring, u: [Fraction; 3], v: [Fraction; 3], second: Vec<[Fraction; 3]>, reversed: bool) -> Step<Self> {
        let first = [dot(ring, &u, &u)?, dot(ring, &u, &v)?, dot(ring, &v, &v)?];
        let square = ring.subtract(&ring.multiply(&first[0], &first[2])?, &ring.multiply(&first[1], &first[1])?)?;
        let mut normal = [(); 3].map(|()| Fraction::zero());
        for (component, (i, j)) in normal.iter_mut().zip([(1, 2), (2, 0), (0, 1)]) {
            let cross = ring.subtract(&ring.multiply(&u[i], &v[j])?, &ring.multiply(&u[j], &v[i])?)?;
            *component = if reversed { cross.negated() } else { cross };
        }
        let along: Step<Vec<Fraction>> = second.iter().map(|second| dot(ring, second, &normal)).collect();
        Ok(Self { tangents: [u, v], first, square, normal, along: along? })
    }

    fn holds(&self, ring: &Ring, quantity: Quantity, value: &Fraction, element: Option<&Fraction>) -> Step<bool> {
        let is = |expected: &Fraction| -> Step<bool> { Ok(ring.subtract(value, expected)?.is_zero()) };
        let scaled = |expected: &Fraction| -> Step<bool> {
            let element = element.ok_or(Exhausted)?;
            Ok(ring.subtract(&ring.multiply(value, element)?, expected)?.is_zero())
        };
        let [e, f, g] = &self.first;
        match quantity {
            Quantity::TangentU(axis) => is(&self.tangents[0][axis]),
            Quantity::TangentV(axis) => is(&self.tangents[1][axis]),
            Quantity::E => is(e),
            Quantity::F => is(f),
            Quantity::G => is(g),
            Quantity::Element => Ok(ring.subtract(&ring.multiply(value, value)?, &self.square)?.is_zero()),
            Quantity::Normal(axis) => scaled(&self.normal[axis]),
            Quantity::L => scaled(&self.along[0]),
            Quantity::M => scaled(&self.along[1]),
            Quantity::N2 => scaled(&self.along[2]),
            Quantity::Gauss => {
                let [l, m, n] = &self.along[..] else { return Err(Exhausted) };
                let fourth = ring.multiply(&self.square, &self.square)?;
                let top = ring.subtract(&ring.multiply(l, n)?, &ring.multiply(m, m)?)?;
                Ok(ring.subtract(&ring.multiply(value, &fourth)?, &top)?.is_zero())
            }
            Quantity::Mean => {
                let [l, m, n] = &self.along[..] else { return Err(Exhausted) };
                let element = element.ok_or(Exhausted)?;
                let two = Fraction::whole(Polynomial::constant(IBig::from(2)));
                let outer = ring.add(&ring.multiply(e, n)?, &ring.multiply(g, l)?)?;
                let top = ring.subtract(&outer, &ring.multiply(&two, &ring.multiply(f, m)?)?)?;
                let below = ring.multiply(&two, &ring.multiply(&self.square, element)?)?;
                Ok(ring.subtract(&ring.multiply(value, &below)?, &top)?.is_zero())
            }
        }
    }
}
