//! From the tree of a formula to a piece of a notation: parentheses, juxtaposition, brackets of functions.

use super::name::{Name, Symbol};
use super::style::{Fence, Mark, Notation};
use crate::simplify::Form;
use rustc_hash::{FxHashMap, FxHashSet};

/// Widths are counted in tenths of a digit. A page of LaTeX's class `article` is 690 wide; names and signs to the left of
/// a formula take some of it.
pub(super) const WIDEST_LINE: u32 = 620;

/// Widest formula under a root, in a fraction, in brackets: what cannot be broken over lines.
const WIDEST_UNBREAKABLE: u32 = 530;

/// Widest exponent and widest argument of an exponential that stands raised.
const WIDEST_RAISED: u32 = 120;

/// Deepest nesting on one line; deeper parts get a name of their own. TeX stops at 255 groups.
const DEEPEST: usize = 20;

/// Width of a sign with its spaces, of a bracket, of a thin space.
const SIGN: u32 = 25;
const BRACKET: u32 = 8;
const THIN: u32 = 4;

/// A formula, or a part of one, in a notation.
#[derive(Clone, Debug)]
pub(super) struct Piece {
    pub text: String,
    pub width: u32,
    /// Whether it is higher than a line of text.
    pub tall: bool,
}

impl Piece {
    fn new(text: String, width: u32) -> Self {
        Self { text, width, tall: false }
    }
}

/// A part of a formula that got a name of its own.
#[derive(Clone, Debug)]
pub(super) struct Auxiliary {
    /// Its name, in the syntax of a sheet.
    pub name: String,
    pub form: Form,
}

/// Where a piece stands: fractions have a bar on the line and a slash in an exponent.
#[derive(Clone, Copy, PartialEq, Eq)]
pub(super) enum Place {
    Line,
    Exponent,
}

pub(super) struct Walk<'a> {
    pub notation: &'a dyn Notation,
    /// How names look, and which name took each look.
    looks: FxHashMap<Name, String>,
    known: FxHashMap<Form, usize>,
    pub auxiliaries: Vec<Auxiliary>,
    /// Places of the auxiliaries that were used since this list was last emptied.
    pub used: Vec<usize>,
    /// The letter of the auxiliary names.
    letter: String,
}

impl<'a> Walk<'a> {
    /// `names`: all names that occur, so that auxiliary names differ from them.
    pub(super) fn new(notation: &'a dyn Notation, names: &FxHashSet<String>) -> Self {
        let taken = |letter: &str| names.iter().any(|name| name.starts_with(letter));
        let letter = ["q", "w", "p", "h", "Q", "W", "P"].into_iter().find(|letter| !taken(letter));
        let letter = letter.map_or_else(
            || (0..).map(|count| "aux".to_owned() + &"x".repeat(count)).find(|word| !taken(word)),
            |letter| Some(letter.to_owned()),
        );
        let letter = letter.expect("some length of the word is free");
        Self {
            notation,
            looks: FxHashMap::default(),
            known: FxHashMap::default(),
            auxiliaries: Vec::new(),
            used: Vec::new(),
            letter,
        }
    }

    /// The form as it stands on one line.
    pub(super) fn piece(&mut self, form: &Form) -> Piece {
        self.write(form, 0, Place::Line)
    }

    /// The name of an auxiliary that stands for `form`.
    pub(super) fn auxiliary(&mut self, form: &Form) -> String {
        let place = *self.known.entry(form.clone()).or_insert(self.auxiliaries.len());
        if place == self.auxiliaries.len() {
            let name = format!("{}_{}", self.letter, place + 1);
            self.auxiliaries.push(Auxiliary { name, form: form.clone() });
        }
        self.used.push(place);
        self.auxiliaries[place].name.clone()
    }

    fn auxiliary_piece(&mut self, form: &Form) -> Piece {
        let name = self.auxiliary(form);
        self.name(&name)
    }

    /// A part that cannot be broken over lines: its own piece, or the name of an auxiliary where it is too wide.
    fn unbreakable(&mut self, form: &Form, depth: usize, place: Place, widest: u32) -> Piece {
        let trivial = matches!(form, Form::Number(_) | Form::Name(..) | Form::Pi);
        if !trivial && (depth >= DEEPEST || self.known.contains_key(form)) {
            return self.auxiliary_piece(form);
        }
        let piece = self.write(form, depth + 1, place);
        if trivial || piece.width <= widest { piece } else { self.auxiliary_piece(form) }
    }

    fn inner(&mut self, form: &Form, depth: usize) -> Piece {
        self.unbreakable(form, depth, Place::Line, WIDEST_UNBREAKABLE)
    }

    fn write(&mut self, form: &Form, depth: usize, place: Place) -> Piece {
        match form {
            Form::Number(number) => match number.split_once('/') {
                Some((p, q)) => self.write(&ratio(p, q), depth, place),
                None => self.number(number),
            },
            Form::Pi => Piece::new(self.notation.pi(), 11),
            Form::Name(name, _) => self.name(name),
            Form::Call(name, arguments) => self.call(name, arguments, depth),
            Form::Sum(terms) => self.sum(terms, depth, place),
            Form::Product(above, below) if below.is_empty() => self.factors(above, depth, place),
            Form::Product(above, below) => self.fraction(above, below, depth, place),
            Form::Power(base, exponent) => self.power(base, exponent, depth),
            Form::Negate(inner) => {
                let inner = self.operand(inner, binds_as_product(inner), depth, place);
                Piece { text: self.notation.negated(&inner.text), width: inner.width + 12, ..inner }
            }
            Form::Relation(sign, left, right) => self.relation(sign, left, right, depth),
            Form::Not(inner) => {
                let inner = self.operand(inner, false, depth, Place::Line);
                let width = inner.width + 30;
                let text = self.notation.row(&[self.notation.mark(Mark::Not), inner.text]);
                Piece { text, width, tall: inner.tall }
            }
        }
    }

    pub(super) fn name(&mut self, name: &str) -> Piece {
        let mut look = Name::new(name);
        let owner = self.looks.entry(look.clone()).or_insert_with(|| name.to_owned());
        if owner != name {
            look = Name::whole(name);
        }
        let base = Piece::new(self.notation.symbol(&look.base), symbol_width(&look.base));
        if look.subscripts.is_empty() {
            return base;
        }
        let mut parts = Vec::new();
        let mut width = 0;
        for subscript in &look.subscripts {
            if !parts.is_empty() {
                parts.push(self.notation.mark(Mark::Comma));
                width += 4;
            }
            parts.push(self.notation.symbol(subscript));
            width += symbol_width(subscript) * 7 / 10;
        }
        Piece::new(self.notation.lowered(&base.text, &self.notation.row(&parts)), base.width + width)
    }

    /// `6e-3` is written as a product with a power of ten.
    fn number(&mut self, number: &str) -> Piece {
        let width = |digits: &str| 10 * digits.len() as u32;
        let Some((mantissa, exponent)) = number.split_once(['e', 'E']) else {
            return Piece::new(self.notation.digits(number), width(number));
        };
        let digits = exponent.trim_start_matches(['+', '-']);
        let shown = self.notation.digits(digits);
        let shown = if exponent.starts_with('-') { self.notation.negated(&shown) } else { shown };
        let power = self.notation.raised(&self.notation.digits("10"), &shown);
        let text = self.notation.row(&[self.notation.digits(mantissa), self.notation.mark(Mark::Dot), power]);
        Piece::new(text, width(mantissa) + width(exponent) + 20 + SIGN)
    }

    fn sum(&mut self, terms: &[(bool, Form)], depth: usize, place: Place) -> Piece {
        let mut parts = Vec::new();
        let (mut width, mut tall) = (0, false);
        for (position, (negative, term)) in terms.iter().enumerate() {
            let piece = self.term(term, position == 0 && !negative, depth, place);
            width += piece.width;
            tall |= piece.tall;
            match (position, negative) {
                (0, false) => parts.push(piece.text),
                (0, true) => {
                    parts.push(self.notation.negated(&piece.text));
                    width += 12;
                }
                (_, negative) => {
                    parts.push(self.notation.mark(if *negative { Mark::Minus } else { Mark::Plus }));
                    parts.push(piece.text);
                    width += SIGN;
                }
            }
        }
        Piece { text: self.notation.row(&parts), width, tall }
    }

    /// A term after its sign.
    pub(super) fn term(&mut self, term: &Form, first: bool, depth: usize, place: Place) -> Piece {
        let fits = binds_as_product(term) || (first && matches!(term, Form::Negate(_)));
        self.operand(term, fits, depth, place)
    }

    /// The form itself, or in parentheses.
    fn operand(&mut self, form: &Form, fits: bool, depth: usize, place: Place) -> Piece {
        if fits {
            if depth >= DEEPEST {
                self.unbreakable(form, depth, place, u32::MAX)
            } else {
                self.write(form, depth + 1, place)
            }
        } else {
            let inner = self.unbreakable(form, depth, place, WIDEST_UNBREAKABLE);
            if self.known.contains_key(form) { inner } else { self.round(inner) }
        }
    }

    fn round(&self, inner: Piece) -> Piece {
        let text = self.notation.fenced(Fence::Round, &inner.text, inner.tall);
        Piece { text, width: inner.width + 2 * BRACKET, tall: inner.tall }
    }

    /// Factors side by side.
    fn factors(&mut self, factors: &[Form], depth: usize, place: Place) -> Piece {
        if let [one] = factors {
            return self.write(one, depth, place);
        }
        let pieces = self.factor_pieces(factors, depth, place);
        let mut parts = Vec::new();
        let (mut width, mut tall) = (0, false);
        for (position, piece) in pieces.into_iter().enumerate() {
            if position > 0 {
                let (mark, gap) = mark_between(&factors[position - 1], &factors[position]);
                parts.push(self.notation.mark(mark));
                width += gap;
            }
            width += piece.width;
            tall |= piece.tall;
            parts.push(piece.text);
        }
        Piece { text: self.notation.row(&parts), width, tall }
    }

    fn factor_pieces(&mut self, factors: &[Form], depth: usize, place: Place) -> Vec<Piece> {
        (0..factors.len()).map(|position| self.factor(factors, position, depth, place)).collect()
    }

    /// One factor of a product of several, in parentheses where it needs them.
    fn factor(&mut self, factors: &[Form], position: usize, depth: usize, place: Place) -> Piece {
        let form = &factors[position];
        // `sin u v` would read as the sine of a product.
        let open = factors.get(position + 1).is_some_and(|next| !begins_with_function(next));
        if let (true, Form::Call(name, arguments)) = (open, form)
            && is_bare_call(form)
        {
            return self.function(name, arguments, None, false, depth);
        }
        if let (true, Form::Power(base, exponent)) = (open, form)
            && let (Form::Call(name, arguments), true) = (&**base, is_bare_call(base) && raises_function(exponent))
        {
            return self.function(name, arguments, Some(exponent), false, depth);
        }
        let fits = binds_as_product(form) && !(place == Place::Exponent && is_fraction(form));
        self.operand(form, fits, depth, place)
    }

    /// A product that is too wide for a line, as pieces that fit; each but the first begins with a multiplication sign.
    pub(super) fn broken_product(&mut self, factors: &[Form], widest: u32) -> Vec<String> {
        let pieces = self.factor_pieces(factors, 0, Place::Line);
        let mut lines: Vec<Vec<String>> = vec![Vec::new()];
        let mut width = 0;
        for (position, piece) in pieces.into_iter().enumerate() {
            let last = lines.last_mut().expect("the first line is there");
            if position > 0 && width + piece.width > widest {
                lines.push(vec![self.notation.mark(Mark::Dot), piece.text]);
                width = SIGN + piece.width;
                continue;
            }
            if position > 0 {
                let (mark, gap) = mark_between(&factors[position - 1], &factors[position]);
                last.push(self.notation.mark(mark));
                width += gap;
            }
            width += piece.width;
            last.push(piece.text);
        }
        lines.iter().map(|parts| self.notation.row(parts)).collect()
    }

    fn fraction(&mut self, above: &[Form], below: &[Form], depth: usize, place: Place) -> Piece {
        let product = |factors: &[Form]| match factors {
            [] => Form::integer(1),
            [one] => one.clone(),
            several => Form::Product(several.to_vec(), Vec::new()),
        };
        let (above, below) = (product(above), product(below));
        if place == Place::Exponent {
            let plain = |side: &Form| binds_tightly(side) || matches!(side, Form::Power(..));
            let product = matches!(&above, Form::Product(_, below) if below.is_empty());
            let parts = [
                self.operand(&above, product || plain(&above), depth, place),
                self.operand(&below, plain(&below), depth, place),
            ];
            let width = parts[0].width + parts[1].width + 10;
            let [above, below] = parts.map(|part| part.text);
            return Piece::new(self.notation.row(&[above, self.notation.mark(Mark::Slash), below]), width);
        }
        let (above, below) = (self.inner(&above, depth), self.inner(&below, depth));
        let text = self.notation.fraction(&above.text, &below.text);
        Piece { text, width: above.width.max(below.width) + 6, tall: true }
    }

    fn power(&mut self, base: &Form, exponent: &Form, depth: usize) -> Piece {
        if let Form::Call(name, arguments) = base
            && raises_function(exponent)
            && is_plain_function(name)
        {
            return self.function(name, arguments, Some(exponent), is_bare_call(base), depth);
        }
        let raised = self.unbreakable(exponent, depth, Place::Exponent, WIDEST_RAISED);
        let base = self.operand(base, binds_tightly(base), depth, Place::Line);
        let text = self.notation.raised(&base.text, &raised.text);
        Piece { text, width: base.width + raised.width * 7 / 10, tall: base.tall || raised.tall }
    }

    fn relation(&mut self, sign: &str, left: &Form, right: &Form, depth: usize) -> Piece {
        let joins = matches!(sign, "and" | "or");
        let fits = |form: &Form| match form {
            Form::Relation("or", ..) => false,
            Form::Relation("and", ..) => sign == "or",
            Form::Relation(..) => joins,
            Form::Call(name, _) => name != "if",
            _ => true,
        };
        let mark = match sign {
            "<" => Mark::Less,
            "<=" => Mark::LessEqual,
            ">" => Mark::Greater,
            ">=" => Mark::GreaterEqual,
            "and" => Mark::And,
            _ => Mark::Or,
        };
        let (left, right) =
            (self.operand(left, fits(left), depth, Place::Line), self.operand(right, fits(right), depth, Place::Line));
        let width = left.width + right.width + if joins { 40 } else { SIGN };
        let text = self.notation.row(&[left.text, self.notation.mark(mark), right.text]);
        Piece { text, width, tall: left.tall || right.tall }
    }

    fn call(&mut self, name: &str, arguments: &[Form], depth: usize) -> Piece {
        match (name, arguments) {
            ("sqrt", [inner]) => {
                let inner = self.inner(inner, depth);
                Piece { text: self.notation.square_root(&inner.text), width: inner.width + 17, tall: inner.tall }
            }
            ("cbrt", [inner]) => {
                let inner = self.inner(inner, depth);
                Piece { text: self.notation.cube_root(&inner.text), width: inner.width + 20, tall: inner.tall }
            }
            ("abs", [inner]) => {
                let inner = self.inner(inner, depth);
                let text = self.notation.fenced(Fence::Bars, &inner.text, inner.tall);
                Piece { text, width: inner.width + 8, tall: inner.tall }
            }
            ("exp", [inner]) => {
                let raised = self.unbreakable(inner, depth, Place::Exponent, WIDEST_RAISED);
                if self.known.contains_key(inner) {
                    return self.function("exp", arguments, None, false, depth);
                }
                let text = self.notation.raised(&self.notation.euler(), &raised.text);
                Piece { text, width: 9 + raised.width * 7 / 10, tall: raised.tall }
            }
            ("hypot", [a, b]) => {
                let square = |form: &Form| (false, Form::Power(Box::new(form.clone()), Box::new(Form::integer(2))));
                self.call("sqrt", &[Form::Sum(vec![square(a), square(b)])], depth)
            }
            ("lgamma", [_]) => {
                let inner = Form::Call("abs".to_owned(), vec![Form::Call("gamma".to_owned(), arguments.to_vec())]);
                self.function("log", &[inner], None, true, depth)
            }
            ("if", [condition, yes, no]) => self.cases(condition, yes, no, depth),
            _ => {
                let bare = matches!(arguments, [one] if is_symbol(one)) && is_plain_function(name);
                self.function(name, arguments, None, bare, depth)
            }
        }
    }

    /// A named function, with an exponent between name and argument or without.
    fn function(&mut self, name: &str, arguments: &[Form], exponent: Option<&Form>, bare: bool, depth: usize) -> Piece {
        let (shown, index, order, arguments) = heading(name, arguments);
        let mut head = Piece::new(self.notation.function(shown), 9 * shown.len() as u32);
        if let Some(index) = index {
            let index = self.write(index, depth + 1, Place::Exponent);
            head = Piece::new(self.notation.lowered(&head.text, &index.text), head.width + 7);
        }
        if let Some(order) = order {
            let order = self.write(order, depth + 1, Place::Exponent);
            let order = self.round(order);
            head = Piece::new(self.notation.raised(&head.text, &order.text), head.width + 14);
        }
        if let Some(exponent) = exponent {
            let raised = self.unbreakable(exponent, depth, Place::Exponent, WIDEST_RAISED);
            head = Piece::new(self.notation.raised(&head.text, &raised.text), head.width + raised.width * 7 / 10);
        }
        let mut parts = Vec::new();
        let (mut width, mut tall) = (0, false);
        for argument in arguments {
            if !parts.is_empty() {
                parts.push(self.notation.mark(Mark::Comma));
                width += 10;
            }
            let piece = self.unbreakable(argument, depth, Place::Line, WIDEST_UNBREAKABLE / arguments.len() as u32);
            width += piece.width;
            tall |= piece.tall;
            parts.push(piece.text);
        }
        let mut argument = Piece { text: self.notation.row(&parts), width: width + THIN, tall };
        if !bare {
            argument = self.round(argument);
        }
        let text = self.notation.apply(&head.text, &argument.text, bare);
        Piece { text, width: head.width + argument.width, tall }
    }

    /// `if` in the last place goes on in the same brace.
    fn cases(&mut self, condition: &Form, yes: &Form, no: &Form, depth: usize) -> Piece {
        let mut rows = Vec::new();
        let mut widths = (0, 0);
        let (mut condition, mut yes, mut no) = (condition, yes, no);
        loop {
            let value = self.unbreakable(yes, depth, Place::Line, WIDEST_UNBREAKABLE / 2);
            let when = self.unbreakable(condition, depth, Place::Line, WIDEST_UNBREAKABLE / 2);
            widths = (widths.0.max(value.width), widths.1.max(when.width + 20));
            rows.push((value.text, when.text));
            match no {
                Form::Call(name, arguments) if name == "if" && arguments.len() == 3 => {
                    (condition, yes, no) = (&arguments[0], &arguments[1], &arguments[2]);
                }
                _ => break,
            }
        }
        let otherwise = self.unbreakable(no, depth, Place::Line, WIDEST_UNBREAKABLE / 2);
        let width = widths.0.max(otherwise.width) + widths.1.max(70) + 30;
        Piece { text: self.notation.cases(&rows, &otherwise.text), width, tall: true }
    }

    /// A formula followed by the differentials of variables.
    pub(super) fn with_differentials(&mut self, form: &Form, variables: &[String]) -> Piece {
        let mut piece = self.operand(form, binds_as_product(form), 0, Place::Line);
        for variable in variables {
            let name = self.name(variable);
            let parts = [piece.text, self.notation.mark(Mark::Thin), self.notation.differential(), name.text];
            piece = Piece { text: self.notation.row(&parts), width: piece.width + name.width + 14, tall: piece.tall };
        }
        piece
    }
}

fn ratio(p: &str, q: &str) -> Form {
    Form::Product(vec![Form::Number(p.to_owned())], vec![Form::Number(q.to_owned())])
}

fn symbol_width(symbol: &Symbol) -> u32 {
    match symbol {
        Symbol::Greek(_) | Symbol::Letter(_) => 11,
        Symbol::Digits(text) => 10 * text.len() as u32,
        Symbol::Word(text) => 10 * text.chars().count() as u32,
    }
}

/// The shown name of a function, its index and order, and the arguments in brackets.
fn heading<'f>(name: &'f str, arguments: &'f [Form]) -> (&'f str, Option<&'f Form>, Option<&'f Form>, &'f [Form]) {
    match (name, arguments) {
        ("asin", _) => ("arcsin", None, None, arguments),
        ("acos", _) => ("arccos", None, None, arguments),
        ("atan", _) => ("arctan", None, None, arguments),
        ("asinh", _) => ("arsinh", None, None, arguments),
        ("acosh", _) => ("arcosh", None, None, arguments),
        ("atanh", _) => ("artanh", None, None, arguments),
        ("log", _) => ("ln", None, None, arguments),
        ("sign", _) => ("sgn", None, None, arguments),
        ("gamma", _) => ("Gamma", None, None, arguments),
        ("elliptic_k", _) => ("K", None, None, arguments),
        ("elliptic_e", _) => ("E", None, None, arguments),
        ("bessel_j", [order, rest @ ..]) => ("J", Some(order), None, rest),
        ("bessel_y", [order, rest @ ..]) => ("Y", Some(order), None, rest),
        ("polygamma", [order, rest @ ..]) => ("psi", None, Some(order), rest),
        ("elliptic_k_derivative", [order, rest @ ..]) => ("K", None, Some(order), rest),
        ("elliptic_e_derivative", [order, rest @ ..]) => ("E", None, Some(order), rest),
        _ => (name, None, None, arguments),
    }
}

/// Functions that may stand before a single symbol without brackets, and carry an exponent.
fn is_plain_function(name: &str) -> bool {
    const PLAIN: &[&str] =
        &["sin", "cos", "tan", "asin", "acos", "atan", "sinh", "cosh", "tanh", "asinh", "acosh", "atanh", "log"];
    PLAIN.contains(&name)
}

fn is_symbol(form: &Form) -> bool {
    match form {
        Form::Number(number) => number.bytes().all(|byte| byte.is_ascii_digit()),
        Form::Name(..) | Form::Pi => true,
        _ => false,
    }
}

fn is_bare_call(form: &Form) -> bool {
    matches!(form, Form::Call(name, arguments)
        if is_plain_function(name) && matches!(&arguments[..], [one] if is_symbol(one)))
}

/// Whether sin(x)^n may be written with the exponent at the name: -1 would read as the inverse function.
fn raises_function(exponent: &Form) -> bool {
    matches!(exponent, Form::Number(number) if number.bytes().all(|byte| byte.is_ascii_digit()))
}

fn begins_with_function(form: &Form) -> bool {
    match form {
        Form::Call(name, _) => !matches!(name.as_str(), "abs" | "exp" | "hypot" | "if"),
        Form::Power(base, exponent) => {
            raises_function(exponent) && matches!(&**base, Form::Call(name, _) if is_plain_function(name))
        }
        _ => false,
    }
}

fn is_fraction(form: &Form) -> bool {
    match form {
        Form::Number(number) => number.contains('/'),
        Form::Product(_, below) => !below.is_empty(),
        _ => false,
    }
}

/// Whether the form can be a factor, or a term after a sign, as it stands.
fn binds_as_product(form: &Form) -> bool {
    match form {
        Form::Sum(_) | Form::Negate(_) | Form::Relation(..) | Form::Not(_) => false,
        Form::Call(name, _) => name != "if",
        Form::Product(above, below) => {
            // A single factor above nothing is that factor.
            !matches!((&above[..], &below[..]), ([one], []) if !binds_as_product(one))
        }
        _ => true,
    }
}

/// Whether the form can carry an exponent as it stands.
fn binds_tightly(form: &Form) -> bool {
    match form {
        Form::Number(number) => !number.contains(['/', 'e', 'E']),
        Form::Name(..) | Form::Pi => true,
        Form::Call(name, _) => name == "abs",
        _ => false,
    }
}

/// The first and last factors of nested products decide what stands side by side.
fn first_factor(form: &Form) -> &Form {
    match form {
        Form::Product(above, below) if below.is_empty() && !above.is_empty() => first_factor(&above[0]),
        Form::Power(base, _) if matches!(**base, Form::Number(_)) => base,
        _ => form,
    }
}

fn last_factor(form: &Form) -> &Form {
    match form {
        Form::Product(above, below) if below.is_empty() && !above.is_empty() => last_factor(&above[above.len() - 1]),
        _ => form,
    }
}

fn mark_between(left: &Form, right: &Form) -> (Mark, u32) {
    let (last, first) = (last_factor(left), first_factor(right));
    let word = |form: &Form| match form {
        Form::Name(name, _) => Name::new(name).is_word(),
        Form::Power(base, _) => matches!(&**base, Form::Name(name, _) if Name::new(name).is_word()),
        _ => false,
    };
    let is_number = |form: &Form| matches!(form, Form::Number(number) if !number.contains('/'));
    if is_number(first) || (is_number(last) && is_fraction(first)) {
        (Mark::Dot, SIGN)
    } else if begins_with_function(first) && !is_root(first) || begins_with_function(last) && !is_root(last) {
        (Mark::BesideFunction, THIN)
    } else if word(last) || word(first) {
        (Mark::Thin, THIN)
    } else {
        (Mark::Nothing, 0)
    }
}

fn is_root(form: &Form) -> bool {
    matches!(form, Form::Call(name, _) if name == "sqrt" || name == "cbrt")
}
