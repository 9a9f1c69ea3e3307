//! Units of measurement: dimensions as powers of the SI base units, and named units with their factors.

use super::diagnostic::Diagnostic;
use super::suggest::nearest;
use super::syntax::{Name, UnitSyntax};
use super::unit_table::{self, NamedUnit};
use crate::expression::Exact;
use std::fmt;

/// Powers of metre, kilogram, second, ampere, kelvin, mole, candela, each as numerator over a common denominator of
/// [`Dimension::DENOMINATOR`], so that `sqrt` of a unit stays exact.
#[derive(Clone, Copy, PartialEq, Eq, Hash, Debug, Default)]
pub struct Dimension(pub [i16; 7]);

impl Dimension {
    /// Exponents are multiples of 1/12.
    pub const DENOMINATOR: i16 = 12;

    /// A plain number.
    pub const NONE: Dimension = Dimension([0; 7]);

    /// The base units, in the order of the exponents.
    pub const BASE_UNITS: [&str; 7] = ["m", "kg", "s", "A", "K", "mol", "cd"];

    /// The dimension with whole powers of the base units; `[1, 0, 0, 0, 0, 0, 0]` is a length.
    pub const fn of(powers: [i8; 7]) -> Self {
        let mut exponents = [0i16; 7];
        let mut at = 0;
        while at < 7 {
            exponents[at] = powers[at] as i16 * Self::DENOMINATOR;
            at += 1;
        }
        Self(exponents)
    }

    /// Whether it is that of a plain number.
    pub fn is_none(self) -> bool {
        self == Self::NONE
    }

    /// The dimension of a product; `None` if an exponent is too large.
    pub fn multiply(self, other: Self) -> Option<Self> {
        self.combine(other, i16::checked_add)
    }

    /// The dimension of a quotient; `None` if an exponent is too large.
    pub fn divide(self, other: Self) -> Option<Self> {
        self.combine(other, i16::checked_sub)
    }

    /// The dimension of a power with exponent `numerator/denominator`; `None` if an exponent is too large or not a
    /// multiple of 1/12, and for a denominator of 0.
    pub fn power(self, numerator: i64, denominator: i64) -> Option<Self> {
        let mut result = [0i16; 7];
        for (slot, exponent) in result.iter_mut().zip(self.0) {
            let scaled = i64::from(exponent).checked_mul(numerator)?;
            if scaled.checked_rem(denominator)? != 0 {
                return None;
            }
            *slot = i16::try_from(scaled.checked_div(denominator)?).ok()?;
        }
        Some(Self(result))
    }

    fn combine(self, other: Self, operation: fn(i16, i16) -> Option<i16>) -> Option<Self> {
        let mut result = [0i16; 7];
        for (slot, (a, b)) in result.iter_mut().zip(self.0.into_iter().zip(other.0)) {
            *slot = operation(a, b)?;
        }
        Some(Self(result))
    }
}

impl fmt::Display for Dimension {
    /// The coherent unit as a sheet writes it: `kg*m^2/s^2`, `m^(1/2)`, `1/s`, and `1` for a plain number. Mass comes
    /// first, as in the SI Brochure (BIPM 2019, table 4).
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let factors = [1, 0, 2, 3, 4, 5, 6].map(|at: usize| (Self::BASE_UNITS[at], (self.0[at].into(), 12)));
        f.write_str(&product_text(&factors))
    }
}

/// A unit with its factor to the coherent SI unit: `value in SI = factor * pi^pi_power * value`.
#[derive(Clone, PartialEq, Debug)]
pub struct Unit {
    /// How it is written between the brackets, e.g. `mm^2`.
    pub text: String,
    /// Its dimension.
    pub dimension: Dimension,
    /// Exact factor, without the power of pi.
    pub factor: Exact,
    /// Power of pi in the factor (degrees are pi/180).
    pub pi_power: i32,
}

impl Unit {
    /// Bound on the relative error of [`Unit::to_si`] and [`Unit::from_si`] for units without pi and for those with pi
    /// up to the second power: one rounding for each of factor, pi, its square, their product and the result.
    pub const CONVERSION_ERROR: f64 = 4.0 * f64::EPSILON;

    /// The unit written as `syntax`.
    ///
    /// # Errors
    /// A name that is not a unit, a temperature with a shifted zero (`degC`), an exponent that is not a multiple of
    /// 1/12, or a factor that is not a fraction or too large.
    pub fn resolve(syntax: &UnitSyntax) -> Result<Unit, Diagnostic> {
        let mut unit = Unit { text: String::new(), dimension: Dimension::NONE, factor: Exact::one(), pi_power: 0 };
        for (name, (numerator, denominator)) in &syntax.factors {
            let named = find(name)?;
            let refused = |what: &str, hint: &str| {
                let written = power_text(&name.text, *numerator, *denominator);
                Diagnostic::error("unit-exponent", name.span, format!("the unit `{written}` {what}")).with_hint(hint)
            };
            let power = named.dimension.power((*numerator).into(), (*denominator).into());
            let dimension = power.and_then(|power| unit.dimension.multiply(power));
            unit.dimension = dimension.ok_or_else(|| {
                refused("has an exponent that cannot be used", "exponents are multiples of 1/12 and not too large")
            })?;
            let factor = rational_power(&named.factor, *numerator, *denominator);
            let factor = factor.ok_or_else(|| refused("has no exact factor", "write it in base units: m, kg, s"))?;
            unit.factor = unit
                .factor
                .multiply(&factor)
                .ok_or_else(|| refused("makes the factor too large", "write the number with fewer powers"))?;
            let pi = named.pi_power * numerator;
            if pi % denominator != 0 {
                return Err(refused("has no exact factor", "use `rad`, which is 1"));
            }
            unit.pi_power += pi / denominator;
        }
        let factors: Vec<_> = syntax.factors.iter().map(|(name, power)| (name.text.as_str(), *power)).collect();
        unit.text = product_text(&factors);
        Ok(unit)
    }

    /// The number to multiply by to get to SI, as a double.
    pub fn scale(&self) -> f64 {
        self.factor.to_f64() * std::f64::consts::PI.powi(self.pi_power)
    }

    /// A value in this unit, in the coherent SI unit; see [`Unit::CONVERSION_ERROR`].
    pub fn to_si(&self, value: f64) -> f64 {
        match self.divisor() {
            Some(divisor) => value / divisor,
            None => value * self.scale(),
        }
    }

    /// A value in the coherent SI unit, in this unit; see [`Unit::CONVERSION_ERROR`].
    pub fn from_si(&self, value: f64) -> f64 {
        match self.divisor() {
            Some(divisor) => value * divisor,
            None => value / self.scale(),
        }
    }

    /// The inverse of the factor where it is a whole number that a double holds: dividing by 1000 rounds once,
    /// multiplying by 0.001 twice.
    fn divisor(&self) -> Option<f64> {
        let inverse = Exact::one().divide(&self.factor)?;
        let whole = inverse.to_i64().filter(|n| n.unsigned_abs() < 1 << 53)?;
        (self.pi_power == 0).then_some(whole as f64)
    }
}

impl fmt::Display for Unit {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.text)
    }
}

/// `factor^(numerator/denominator)` if that is a fraction.
fn rational_power(factor: &Exact, numerator: i32, denominator: i32) -> Option<Exact> {
    let (numerator, denominator) = reduced(numerator, denominator);
    let base = match denominator {
        _ if factor.is_one() => return Some(Exact::one()),
        1 => factor.clone(),
        2 => factor.square_root()?,
        4 => factor.square_root()?.square_root()?,
        _ => return None,
    };
    base.power(numerator.into())
}

fn reduced(numerator: i32, denominator: i32) -> (i32, i32) {
    let (mut a, mut b) = (numerator.unsigned_abs(), denominator.unsigned_abs());
    while b != 0 {
        (a, b) = (b, a % b);
    }
    let divisor = a.max(1) as i32;
    (numerator / divisor, denominator / divisor)
}

/// `name^(p/q)` with as few signs as possible.
fn power_text(name: &str, numerator: i32, denominator: i32) -> String {
    match reduced(numerator, denominator) {
        (1, 1) => name.to_owned(),
        (n, 1) => format!("{name}^{n}"),
        (n, d) => format!("{name}^({n}/{d})"),
    }
}

/// Factors joined by `*` and `/`, those with exponent 0 left out; `1` if none is left.
fn product_text(factors: &[(&str, (i32, i32))]) -> String {
    let used = || factors.iter().filter(|(_, (numerator, _))| *numerator != 0);
    let over = used().filter(|(_, (n, _))| *n > 0).map(|&(name, (n, d))| power_text(name, n, d)).collect::<Vec<_>>();
    let under = used().filter(|(_, (n, _))| *n < 0).map(|&(name, (n, d))| format!("/{}", power_text(name, -n, d)));
    let over = if over.is_empty() { "1".to_owned() } else { over.join("*") };
    over + &under.collect::<String>()
}

/// The unit of this name, with or without a prefix; a unit's own name goes before a prefixed one (`min`, `cd`, `ft`).
fn find(name: &Name) -> Result<NamedUnit, Diagnostic> {
    unit_table::find(&name.text).ok_or_else(|| unknown(name))
}

/// Why a name is not a unit and what may have been meant.
fn unknown(name: &Name) -> Diagnostic {
    let text = name.text.as_str();
    if matches!(text, "degC" | "degF" | "°C" | "°F" | "celsius" | "Celsius" | "fahrenheit" | "Fahrenheit") {
        let message = format!("`{text}` has a zero of its own and cannot be used as a factor");
        let hint = "give temperatures in `K`; a difference of 1 degC is 1 K, one of 1 degF is 5/9 K";
        return Diagnostic::error("unit-with-offset", name.span, message).with_hint(hint);
    }
    let error = Diagnostic::error("unknown-unit", name.span, format!("there is no unit `{text}`"));
    match meant(text) {
        Some(meant) => error.with_hint(format!("did you mean `{meant}`?")),
        None => error.with_hint("units are SI and common others with prefixes, such as `mm`, `kN`, `MPa`, `ft`, `deg`"),
    }
}

/// The unit that is probably meant by a name that is none.
fn meant(text: &str) -> Option<String> {
    if let Some(symbol) = unit_table::symbol_of(text) {
        return Some(symbol.to_owned());
    }
    // `m2`, `cm3`
    let letters = text.trim_end_matches(|c: char| c.is_ascii_digit());
    if letters.len() < text.len() && unit_table::find(letters).is_some() {
        return Some(format!("{letters}^{}", &text[letters.len()..]));
    }
    // `Nm`, `kNm`, `Pas`
    let mut cuts = text.char_indices().skip(1).map(|(at, _)| text.split_at(at));
    let known = |name: &str| unit_table::find(name).is_some();
    if text.len() <= 8
        && let Some((a, b)) = cuts.find(|(a, b)| a.chars().all(char::is_alphabetic) && known(a) && known(b))
    {
        return Some(format!("{a}*{b}"));
    }
    let names = unit_table::common_names();
    nearest(text, names.iter().map(String::as_str)).map(str::to_owned)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::language::syntax::{Sheet, Statement};
    use crate::language::{Source, parse};

    fn sheet(unit: &str) -> Sheet {
        parse(&Source::new("test.sheet", format!("a = b as [{unit}]"))).0
    }

    /// What a sheet makes of `[unit]`.
    fn resolve(unit: &str) -> Result<Unit, Diagnostic> {
        match sheet(unit).statements.first() {
            Some(Statement::Definition(definition)) => Unit::resolve(definition.shown_as.as_ref().unwrap()),
            _ => panic!("[{unit}] is not the syntax of a unit"),
        }
    }

    fn scale(unit: &str) -> f64 {
        resolve(unit).unwrap().scale()
    }

    fn is_close(value: f64, expected: f64) -> bool {
        (value / expected - 1.0).abs() < 1e-14
    }

    /// Value in SI and coherent unit of every unit of the table, as given by pint 0.25.3 (whose own factors carry
    /// rounding errors of 1e-15), where angles and numbers of events are plain numbers.
    const VALUES: &[(&str, f64, &str)] = &[
        ("m", 1.0, "m"),
        ("g", 0.001, "kg"),
        ("s", 1.0, "s"),
        ("A", 1.0, "A"),
        ("K", 1.0, "K"),
        ("mol", 1.0, "mol"),
        ("cd", 1.0, "cd"),
        ("rad", 1.0, "1"),
        ("Hz", 1.0, "1/s"),
        ("N", 1.0, "kg*m/s^2"),
        ("Pa", 1.0, "kg/m/s^2"),
        ("J", 1.0, "kg*m^2/s^2"),
        ("W", 1.0, "kg*m^2/s^3"),
        ("C", 1.0, "s*A"),
        ("V", 1.0, "kg*m^2/s^3/A"),
        ("F", 1.0, "s^4*A^2/kg/m^2"),
        ("ohm", 1.0, "kg*m^2/s^3/A^2"),
        ("S", 1.0, "s^3*A^2/kg/m^2"),
        ("Wb", 1.0, "kg*m^2/s^2/A"),
        ("T", 1.0, "kg/s^2/A"),
        ("H", 1.0, "kg*m^2/s^2/A^2"),
        ("lm", 1.0, "cd"),
        ("lx", 1.0, "cd/m^2"),
        ("Bq", 1.0, "1/s"),
        ("Gy", 1.0, "m^2/s^2"),
        ("Sv", 1.0, "m^2/s^2"),
        ("kat", 1.0, "mol/s"),
        ("min", 60.0, "s"),
        ("h", 3600.0, "s"),
        ("d", 86400.0, "s"),
        ("deg", 0.017453292519943295, "1"),
        ("arcmin", 0.00029088820866572163, "1"),
        ("arcsec", 4.84813681109536e-06, "1"),
        ("L", 0.0010000000000000002, "m^3"),
        ("t", 1000.0, "kg"),
        ("ha", 10000.0, "m^2"),
        ("au", 149597870700.0, "m"),
        ("eV", 1.602176634e-19, "kg*m^2/s^2"),
        ("gon", 0.015707963267948967, "1"),
        ("rpm", 0.10471975511965977, "1/s"),
        ("%", 0.01, "1"),
        ("ppm", 1e-06, "1"),
        ("in", 0.0254, "m"),
        ("mil", 2.5399999999999997e-05, "m"),
        ("ft", 0.30479999999999996, "m"),
        ("yd", 0.9144, "m"),
        ("mi", 1609.344, "m"),
        ("nmi", 1852.0, "m"),
        ("Å", 1e-10, "m"),
        ("ly", 9460730472580800.0, "m"),
        ("acre", 4046.8564223999997, "m^2"),
        ("gal", 0.0037854117839999993, "m^3"),
        ("lb", 0.4535923700000001, "kg"),
        ("oz", 0.028349523125000005, "kg"),
        ("slug", 14.59390293720637, "kg"),
        ("mph", 0.44704, "m/s"),
        ("kn", 0.5144444444444445, "m/s"),
        ("dyn", 1e-05, "kg*m/s^2"),
        ("kgf", 9.80665, "kg*m/s^2"),
        ("lbf", 4.4482216152605005, "kg*m/s^2"),
        ("kip", 4448.221615260501, "kg*m/s^2"),
        ("bar", 100000.0, "kg/m/s^2"),
        ("atm", 101325.0, "kg/m/s^2"),
        ("Torr", 133.32236842105263, "kg/m/s^2"),
        ("mmHg", 133.322387415, "kg/m/s^2"),
        ("psi", 6894.7572931683635, "kg/m/s^2"),
        ("ksi", 6894757.293168363, "kg/m/s^2"),
        ("psf", 47.88025898033586, "kg/m/s^2"),
        ("erg", 1.0000000000000001e-07, "kg*m^2/s^2"),
        ("Wh", 3600.0, "kg*m^2/s^2"),
        ("cal", 4.184, "kg*m^2/s^2"),
        ("hp", 745.6998715822701, "kg*m^2/s^3"),
        ("P", 0.1, "kg/m/s"),
        ("St", 0.0001, "m^2/s"),
    ];

    #[test]
    fn factors_and_dimensions_are_those_of_an_independent_table() {
        for (name, value, coherent) in VALUES {
            let unit = resolve(name).unwrap();
            assert!(is_close(unit.scale(), *value), "{name}: {} and not {value}", unit.scale());
            assert_eq!(unit.dimension.to_string(), *coherent, "{name}");
        }
        // NIST SP 811 (2008), B.8: the Btu of the International Table is 1.055 055 852 62 kJ.
        assert_eq!(scale("Btu"), 1055.05585262);
        // IAU 2015 resolution B2, note 4: the parsec is exactly 648000/pi astronomical units, 3.085677581e16 m.
        assert!(is_close(scale("pc"), 3.085_677_581_491_367e16));
        assert_eq!(scale("rev"), std::f64::consts::TAU);
        for (name, equal) in [("Ω", "ohm"), ("°", "deg"), ("l", "L"), ("turn", "rev"), ("angstrom", "Å"), ("sr", "rad")]
        {
            assert_eq!(scale(name), scale(equal));
        }
    }

    #[test]
    fn prefixes_go_with_si_units_and_after_whole_names() {
        for (name, value) in
            [("kg", 1.0), ("mm", 1e-3), ("\u{b5}m", 1e-6), ("um", 1e-6), ("dam", 10.0), ("hPa", 100.0), ("MPa", 1e6)]
        {
            assert_eq!(scale(name), value, "{name}");
        }
        // min, cd, Pa, ft and pc are themselves, not milli-inch, centi-day, peta-year, femto-tonne, pico-coulomb.
        for (name, value) in [("min", 60.0), ("cd", 1.0), ("Pa", 1.0), ("ft", 0.3048), ("kn", 1852.0 / 3600.0)] {
            assert!(is_close(scale(name), value), "{name}");
        }
        for name in ["kft", "mdeg", "kmin", "kkg", "MM", "k", ""] {
            assert!(name.is_empty() || resolve(name).is_err(), "{name}");
        }
    }

    #[test]
    fn products_and_powers() {
        let unit = resolve("kN*mm^2/(s*kg^(1/2))").unwrap();
        assert_eq!(unit.text, "kN*mm^2/s/kg^(1/2)");
        assert!(is_close(unit.scale(), 1e-3));
        assert_eq!(unit.dimension.to_string(), "kg^(1/2)*m^3/s^3");
        assert_eq!(resolve("1/m^2").unwrap().text, "1/m^2");
        assert_eq!(resolve("1").unwrap().dimension, Dimension::NONE);
        assert_eq!(resolve("deg^2").unwrap().pi_power, 2);
        assert_eq!(resolve("m^0").unwrap().text, "1");
        assert_eq!(resolve("mm^(2/4)").unwrap_err().code, "unit-exponent");
        assert_eq!(scale("ha^(1/2)"), 100.0);
        for refused in ["deg^(1/2)", "m^(1/5)", "cm^(1/3)", "Qm^99/qm^99"] {
            assert_eq!(resolve(refused).unwrap_err().code, "unit-exponent", "{refused}");
        }
    }

    #[test]
    fn dimensions_multiply_and_have_roots() {
        let length = Dimension::of([1, 0, 0, 0, 0, 0, 0]);
        let area = length.multiply(length).unwrap();
        assert_eq!(area, length.power(2, 1).unwrap());
        assert_eq!(area.power(1, 2), Some(length));
        assert_eq!(area.divide(area), Some(Dimension::NONE));
        assert_eq!(length.power(1, 12).unwrap().to_string(), "m^(1/12)");
        assert_eq!(length.power(1, 24), None);
        assert_eq!(length.power(1, 0), None);
        assert_eq!(length.power(i64::MIN, -1), None);
        assert_eq!(length.power(100_000, 1), None);
        assert_eq!(length.power(-1, 2).unwrap().to_string(), "1/m^(1/2)");
        assert_eq!(Dimension::NONE.to_string(), "1");
    }

    #[test]
    fn conversion_stays_within_its_bound() {
        let millimetre = resolve("mm").unwrap();
        // Dividing by 1000 rounds once, so the nearest double of 0.3 comes out.
        assert_eq!(millimetre.to_si(300.0), 0.3);
        assert_eq!(millimetre.from_si(0.0025), 2.5);
        for name in ["mm", "psi", "deg", "arcsec", "kn", "eV", "deg^2"] {
            let unit = resolve(name).unwrap();
            let there_and_back = unit.from_si(unit.to_si(0.7));
            assert!((there_and_back / 0.7 - 1.0).abs() <= 2.0 * Unit::CONVERSION_ERROR, "{name}");
        }
    }
}
