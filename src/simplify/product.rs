//! Products and sums for the page: which factor stands where, and which powers are merged.

use super::form::{Form, NameKind};
use dashu_base::{Signed, UnsignedAbs};
use dashu_int::{IBig, UBig};
use dashu_ratio::RBig;

/// An exponent p/q, q 1 or 2.
pub(super) type Exponent = (i64, i64);

/// The product of a positive rational number and powers of forms, shortest merging of equal exponents included.
pub(super) fn product(number: &RBig, factors: Vec<(Form, Exponent)>) -> Form {
    let mut number = number.clone();
    let mut flat = Vec::new();
    for (form, exponent) in factors {
        dissolve(form, exponent, &mut number, &mut flat);
    }
    let mut flat: Vec<(Form, Exponent)> = flat.into_iter().filter(|(_, (p, _))| *p != 0).collect();
    join_conjugates(&mut flat);
    let mut best = arranged(&number, flat.clone());
    if let Some((number, joined)) = double_angles(&number, &flat) {
        let form = arranged(&number, joined);
        if form.operations() < best.operations() {
            best = form;
        }
    }
    best
}

/// sin(x)^i cos(x)^i as (sin(2x)/2)^i.
fn double_angles(number: &RBig, factors: &[(Form, Exponent)]) -> Option<(RBig, Vec<(Form, Exponent)>)> {
    let (mut number, mut factors) = (number.clone(), factors.to_vec());
    let mut changed = false;
    for (sine, cosine) in [("sin", "cos"), ("sinh", "cosh")] {
        while let Some((first, second, argument)) = matching(&factors, sine, cosine, |i, j| i == j) {
            let exponent = factors[first].1;
            let two = RBig::from(2u8).pow(exponent.0.abs() as isize);
            number = if exponent.0 > 0 { number / two } else { number * two };
            let doubled = product(&RBig::from(2u8), vec![(argument, (1, 1))]);
            factors.remove(first.max(second));
            factors.remove(first.min(second));
            dissolve(Form::Call(sine.to_owned(), vec![doubled]), exponent, &mut number, &mut factors);
            changed = true;
        }
    }
    changed.then_some((number, factors))
}

/// Places of f(x)^i and g(x)^j with whole exponents that fulfil a condition, and x.
fn matching(
    factors: &[(Form, Exponent)],
    f: &str,
    g: &str,
    condition: impl Fn(i64, i64) -> bool,
) -> Option<(usize, usize, Form)> {
    for (first, (form, (i, root))) in factors.iter().enumerate() {
        let Form::Call(name, arguments) = form else { continue };
        if name != f || *root != 1 {
            continue;
        }
        let wanted = Form::Call(g.to_owned(), arguments.clone());
        if let Some(second) =
            factors.iter().position(|(other, (j, root))| *root == 1 && *other == wanted && condition(*i, *j))
        {
            return Some((first, second, arguments[0].clone()));
        }
    }
    None
}

/// The factors in order, equal exponents merged where that is shorter.
fn arranged(number: &RBig, mut factors: Vec<(Form, Exponent)>) -> Form {
    for (sine, cosine, tangent) in [("sin", "cos", "tan"), ("sinh", "cosh", "tanh")] {
        while let Some((first, second, argument)) = matching(&factors, sine, cosine, |i, j| i == -j) {
            let exponent = factors[first].1;
            factors.remove(first.max(second));
            factors.remove(first.min(second));
            factors.push((Form::Call(tangent.to_owned(), vec![argument]), exponent));
        }
    }
    let (p, q) = (number.numerator().clone().unsigned_abs(), number.denominator().clone());
    factors.sort_by_key(|(form, _)| rank(form));
    let plain = build(&p, &q, &factors);
    let mut best = plain;
    let mut powers: Vec<i64> =
        factors.iter().filter(|(_, e)| e.1 == 1).map(|(_, e)| e.0.abs()).filter(|e| *e > 1).collect();
    powers.sort_unstable();
    powers.dedup();
    for power in powers {
        let belongs = |(form, exponent): &(Form, Exponent)| {
            exponent.1 == 1 && exponent.0.abs() == power && !matches!(form, Form::Sum(_))
        };
        if factors.iter().filter(|factor| belongs(factor)).count() < 2 {
            continue;
        }
        let (members, mut others): (Vec<_>, Vec<_>) = factors.iter().cloned().partition(belongs);
        let members: Vec<_> = members.into_iter().map(|(form, (e, _))| (form, (e.signum(), 1))).collect();
        // Numbers that are such a power go inside.
        let root = |value: &UBig| exact_root(value, power as usize);
        let (inner_p, outer_p) = root(&p).map_or((UBig::ONE, p.clone()), |root| (root, UBig::ONE));
        let (inner_q, outer_q) = root(&q).map_or((UBig::ONE, q.clone()), |root| (root, UBig::ONE));
        let inner = build(&inner_p, &inner_q, &members);
        others.push((inner, (power, 1)));
        others.sort_by_key(|(form, _)| rank(form));
        let merged = build(&outer_p, &outer_q, &others);
        if merged.operations() < best.operations() {
            best = merged;
        }
    }
    best
}

/// The product with a sign; a minus sign goes into a difference among the factors, where it costs nothing.
pub(super) fn signed_product(negative: bool, number: &RBig, mut factors: Vec<(Form, Exponent)>) -> (bool, Form) {
    if negative {
        let turned = factors.iter_mut().find_map(|(form, (power, root))| {
            if *root != 1 || *power % 2 == 0 {
                return None;
            }
            flipped(form).map(|other| *form = other)
        });
        if turned.is_some() {
            return (false, product(number, factors));
        }
    }
    (negative, product(number, factors))
}

/// Factors of products and numbers go where they belong, equal bases together.
fn dissolve(form: Form, exponent: Exponent, number: &mut RBig, flat: &mut Vec<(Form, Exponent)>) {
    let (power, root) = exponent;
    match form {
        Form::Product(above, below) if root == 1 => {
            above.into_iter().for_each(|form| dissolve(form, (power, 1), number, flat));
            below.into_iter().for_each(|form| dissolve(form, (-power, 1), number, flat));
        }
        Form::Number(text) if text == "1" => {}
        // A long number is a named constant of the sheet and stays as it was typed.
        Form::Number(text) if root == 1 && text.len() <= 4 && text.parse::<u64>().is_ok_and(|n| n > 0) => {
            let value = RBig::from(text.parse::<u64>().expect("just parsed"));
            let value = value.pow(power.abs() as isize);
            *number = if power < 0 { &*number / value } else { &*number * value };
        }
        Form::Power(base, inner) if root == 1 => match &*inner {
            Form::Number(n) if n.parse::<i64>().is_ok_and(|n| n < 1_000) => {
                let inner = n.parse::<i64>().expect("just parsed");
                dissolve(*base, (power * inner, 1), number, flat);
            }
            _ => flat.push((Form::Power(base, inner), exponent)),
        },
        form => match flat.iter_mut().find(|(known, (_, own))| *known == form && *own <= 2 && root <= 2) {
            Some((_, total)) => {
                // In halves: f^(p/2).
                let halves = total.0 * (2 / total.1) + power * (2 / root);
                *total = if halves % 2 == 0 { (halves / 2, 1) } else { (halves, 2) };
            }
            None => flat.push((form, exponent)),
        },
    }
}

/// (a + b)^n (a - b)^n as (a^2 - b^2)^n.
fn join_conjugates(flat: &mut Vec<(Form, Exponent)>) {
    let parts = |form: &Form| match form {
        Form::Sum(terms) => match &terms[..] {
            [(false, a), (minus, b)] => Some((a.clone(), b.clone(), *minus)),
            _ => None,
        },
        _ => None,
    };
    for first in 0..flat.len() {
        let Some((a, b, minus)) = parts(&flat[first].0) else { continue };
        let other = flat.iter().position(|(form, exponent)| {
            *exponent == flat[first].1
                && parts(form)
                    .is_some_and(|(c, d, other)| other != minus && ((c == a && d == b) || (!other && c == b && d == a)))
        });
        if let Some(second) = other {
            // The difference says which square is subtracted.
            let (a, b) = if minus { (a, b) } else { parts(&flat[second].0).map(|(a, b, _)| (a, b)).expect("matched") };
            let square = |form: Form| product(&RBig::ONE, vec![(form, (2, 1))]);
            let joined = Form::Sum(vec![(false, square(a)), (true, square(b))]);
            if joined.operations() <= flat[first].0.operations() + flat[second].0.operations() + 1 {
                let exponent = flat[first].1;
                flat.remove(first.max(second));
                flat.remove(first.min(second));
                flat.push((joined, exponent));
                return join_conjugates(flat);
            }
        }
    }
}

fn exact_root(value: &UBig, index: usize) -> Option<UBig> {
    if *value == UBig::ONE {
        return Some(UBig::ONE);
    }
    let root = value.nth_root(index);
    (root.pow(index) == *value).then_some(root)
}

fn build(p: &UBig, q: &UBig, factors: &[(Form, Exponent)]) -> Form {
    let (mut above, mut below) = (Vec::new(), Vec::new());
    if *p != UBig::ONE {
        above.push(Form::Number(p.to_string()));
    }
    if *q != UBig::ONE {
        below.push(Form::Number(q.to_string()));
    }
    for (form, (exponent, root)) in factors {
        let side = if *exponent > 0 { &mut above } else { &mut below };
        match powered(form, exponent.abs(), *root) {
            // A product inside a product is written out.
            Form::Product(numerator, denominator) if *exponent > 0 && *root == 1 && exponent.abs() == 1 => {
                above.extend(numerator);
                below.extend(denominator);
            }
            Form::Number(one) if one == "1" => {}
            other => side.push(other),
        }
    }
    fraction(above, below)
}

/// `above/below`, without empty products.
pub(super) fn fraction(mut above: Vec<Form>, below: Vec<Form>) -> Form {
    above.sort_by_key(rank);
    match (above.len(), below.len()) {
        (0, 0) => Form::integer(1),
        (1, 0) => above.remove(0),
        _ => Form::Product(above, below),
    }
}

/// A form to the power `exponent/root`.
pub(super) fn powered(form: &Form, exponent: i64, root: i64) -> Form {
    let number = |value: i64| Form::integer(value.unsigned_abs());
    match (exponent, root) {
        (1, 1) => form.clone(),
        (_, 1) => match form {
            Form::Power(base, inner) => match &**inner {
                Form::Number(n) if n.parse::<i64>().is_ok_and(|n| n * exponent < 1_000) => {
                    let total = n.parse::<i64>().expect("just parsed") * exponent;
                    Form::Power(base.clone(), Box::new(number(total)))
                }
                _ => Form::Power(Box::new(form.clone()), Box::new(number(exponent))),
            },
            _ => Form::Power(Box::new(form.clone()), Box::new(number(exponent))),
        },
        (1, _) => Form::Call("sqrt".to_owned(), vec![form.clone()]),
        _ => {
            let quotient = Form::Product(vec![number(exponent)], vec![number(root)]);
            Form::Power(Box::new(form.clone()), Box::new(quotient))
        }
    }
}

/// The sum of terms with signs: numbers and parameters first, a positive term in front.
pub(super) fn sum(terms: Vec<(bool, Form)>) -> Form {
    let mut flat = Vec::with_capacity(terms.len());
    for (negative, term) in terms {
        match term {
            Form::Sum(inner) => flat.extend(inner.into_iter().map(|(n, term)| (n != negative, term))),
            Form::Negate(inner) => flat.push((!negative, *inner)),
            other => flat.push((negative, other)),
        }
    }
    join_integers(&mut flat);
    flat.sort_by_key(|(_, term)| weight(term));
    if let Some(first) = flat.iter().position(|(negative, _)| !negative) {
        let leader = flat.remove(first);
        flat.insert(0, leader);
    }
    match flat.len() {
        0 => Form::integer(0),
        1 => {
            let (negative, term) = flat.remove(0);
            if negative { Form::Negate(Box::new(term)) } else { term }
        }
        _ => Form::Sum(flat),
    }
}

/// Several whole numbers as one.
fn join_integers(terms: &mut Vec<(bool, Form)>) {
    let integer = |(negative, term): &(bool, Form)| match term {
        Form::Number(text) => text.parse::<i64>().ok().map(|value| if *negative { -value } else { value }),
        _ => None,
    };
    let values: Vec<i64> = terms.iter().filter_map(integer).collect();
    let total = values.iter().try_fold(0i64, |sum, &value| sum.checked_add(value));
    if values.len() < 2 || total.is_none() {
        return;
    }
    terms.retain(|term| integer(term).is_none());
    match total {
        Some(0) | None => {}
        Some(total) => terms.push((total < 0, Form::integer(total.unsigned_abs()))),
    }
}

/// The sum with all signs turned, if that costs nothing: `a - b` becomes `b - a`.
pub(super) fn flipped(form: &Form) -> Option<Form> {
    match form {
        Form::Sum(terms) if terms.iter().any(|(negative, _)| *negative) => {
            Some(sum(terms.iter().map(|(negative, term)| (!negative, term.clone())).collect()))
        }
        _ => None,
    }
}

/// Order of factors: numbers, parameters, variables, functions, sums, roots.
pub(super) fn rank(form: &Form) -> (u8, u8) {
    match form {
        Form::Number(_) => (0, 0),
        Form::Pi => (1, 0),
        Form::Name(_, NameKind::Parameter) => (2, 0),
        Form::Name(_, NameKind::Variable) => (3, 0),
        Form::Call(name, _) if name == "sqrt" => (8, 0),
        Form::Call(..) => (5, 0),
        Form::Power(base, _) => match rank(base) {
            (place, 0) => (place, 0),
            other => other,
        },
        Form::Product(above, below) => above.iter().chain(below).map(rank).max().unwrap_or((4, 0)),
        Form::Sum(_) => (6, 0),
        Form::Negate(_) | Form::Relation(..) | Form::Not(_) => (7, 0),
    }
}

/// Order of terms: what varies least comes first.
fn weight(form: &Form) -> u8 {
    match form {
        Form::Number(_) => 0,
        Form::Pi => 1,
        Form::Name(_, NameKind::Parameter) => 2,
        Form::Name(_, NameKind::Variable) => 4,
        Form::Call(_, arguments) => arguments.iter().map(weight).max().unwrap_or(0).max(3) + 1,
        Form::Sum(terms) => terms.iter().map(|(_, term)| weight(term)).max().unwrap_or(0),
        Form::Product(above, below) => above.iter().chain(below).map(weight).max().unwrap_or(0),
        Form::Power(base, _) => weight(base),
        Form::Negate(inner) | Form::Not(inner) => weight(inner),
        Form::Relation(_, left, right) => weight(left).max(weight(right)),
    }
}

/// Whether a rational number is below 0.
pub(super) fn is_negative(value: &RBig) -> bool {
    value.is_negative()
}

/// A rational number from integers, the divisor positive.
pub(super) fn ratio(numerator: IBig, divisor: IBig) -> RBig {
    RBig::from_parts_signed(numerator, divisor)
}
