//! The named units and the SI prefixes.
//!
//! Sources, quoted from memory and checked against the values frozen in the tests below: *The International System of
//! Units (SI Brochure)*, 9th edition, BIPM 2019: tables 2 and 4 (SI units), 7 (prefixes, with those added by the 27th
//! CGPM in 2022), 8 (units accepted for use with the SI). NIST Special Publication 811, A. Thompson and B. N. Taylor,
//! 2008, appendix B.8 (all others).

use super::unit::Dimension;
use crate::expression::Exact;

/// A unit by its name: `value in SI = factor * pi^pi_power * value`.
pub(super) struct NamedUnit {
    pub dimension: Dimension,
    pub factor: Exact,
    pub pi_power: i32,
}

/// A line of the table.
struct Entry {
    names: &'static [&'static str],
    /// Decimal numbers and their powers; their product is the factor.
    factor: &'static [(&'static str, i64)],
    pi_power: i32,
    dimension: Dimension,
    prefixes: bool,
}

const fn dimension(m: i8, kg: i8, s: i8, a: i8, k: i8, mol: i8, cd: i8) -> Dimension {
    Dimension::of([m, kg, s, a, k, mol, cd])
}

const NUMBER: Dimension = Dimension::NONE;
const LENGTH: Dimension = dimension(1, 0, 0, 0, 0, 0, 0);
const AREA: Dimension = dimension(2, 0, 0, 0, 0, 0, 0);
const VOLUME: Dimension = dimension(3, 0, 0, 0, 0, 0, 0);
const MASS: Dimension = dimension(0, 1, 0, 0, 0, 0, 0);
const TIME: Dimension = dimension(0, 0, 1, 0, 0, 0, 0);
const RATE: Dimension = dimension(0, 0, -1, 0, 0, 0, 0);
const SPEED: Dimension = dimension(1, 0, -1, 0, 0, 0, 0);
const FORCE: Dimension = dimension(1, 1, -2, 0, 0, 0, 0);
const PRESSURE: Dimension = dimension(-1, 1, -2, 0, 0, 0, 0);
const ENERGY: Dimension = dimension(2, 1, -2, 0, 0, 0, 0);
const POWER: Dimension = dimension(2, 1, -3, 0, 0, 0, 0);

type Factor = &'static [(&'static str, i64)];
type Names = &'static [&'static str];

const fn with_prefixes(names: Names, factor: Factor, dimension: Dimension) -> Entry {
    Entry { names, factor, pi_power: 0, dimension, prefixes: true }
}

const fn alone(names: Names, factor: Factor, dimension: Dimension) -> Entry {
    Entry { names, factor, pi_power: 0, dimension, prefixes: false }
}

const fn angle(names: Names, factor: Factor, dimension: Dimension) -> Entry {
    Entry { names, factor, pi_power: 1, dimension, prefixes: false }
}

/// Foot, pound, standard gravity and inch, of which many others are made.
const FOOT: (&str, i64) = ("0.3048", 1);
const POUND: (&str, i64) = ("0.45359237", 1);
const GRAVITY: (&str, i64) = ("9.80665", 1);

#[rustfmt::skip]
const TABLE: &[Entry] = &[
    // SI base units; the kilogram comes from the gram by its prefix.
    with_prefixes(&["m"], &[], LENGTH),
    with_prefixes(&["g"], &[("1000", -1)], MASS),
    with_prefixes(&["s"], &[], TIME),
    with_prefixes(&["A"], &[], dimension(0, 0, 0, 1, 0, 0, 0)),
    with_prefixes(&["K"], &[], dimension(0, 0, 0, 0, 1, 0, 0)),
    with_prefixes(&["mol"], &[], dimension(0, 0, 0, 0, 0, 1, 0)),
    with_prefixes(&["cd"], &[], dimension(0, 0, 0, 0, 0, 0, 1)),
    // SI derived units with names.
    with_prefixes(&["rad"], &[], NUMBER),
    with_prefixes(&["sr"], &[], NUMBER),
    with_prefixes(&["Hz"], &[], RATE),
    with_prefixes(&["N"], &[], FORCE),
    with_prefixes(&["Pa"], &[], PRESSURE),
    with_prefixes(&["J"], &[], ENERGY),
    with_prefixes(&["W"], &[], POWER),
    with_prefixes(&["C"], &[], dimension(0, 0, 1, 1, 0, 0, 0)),
    with_prefixes(&["V"], &[], dimension(2, 1, -3, -1, 0, 0, 0)),
    with_prefixes(&["F"], &[], dimension(-2, -1, 4, 2, 0, 0, 0)),
    with_prefixes(&["ohm", "Ω"], &[], dimension(2, 1, -3, -2, 0, 0, 0)),
    with_prefixes(&["S"], &[], dimension(-2, -1, 3, 2, 0, 0, 0)),
    with_prefixes(&["Wb"], &[], dimension(2, 1, -2, -1, 0, 0, 0)),
    with_prefixes(&["T"], &[], dimension(0, 1, -2, -1, 0, 0, 0)),
    with_prefixes(&["H"], &[], dimension(2, 1, -2, -2, 0, 0, 0)),
    with_prefixes(&["lm"], &[], dimension(0, 0, 0, 0, 0, 0, 1)),
    with_prefixes(&["lx"], &[], dimension(-2, 0, 0, 0, 0, 0, 1)),
    with_prefixes(&["Bq"], &[], RATE),
    with_prefixes(&["Gy"], &[], dimension(2, 0, -2, 0, 0, 0, 0)),
    with_prefixes(&["Sv"], &[], dimension(2, 0, -2, 0, 0, 0, 0)),
    with_prefixes(&["kat"], &[], dimension(0, 0, -1, 0, 0, 1, 0)),
    // Accepted for use with the SI.
    alone(&["min"], &[("60", 1)], TIME),
    alone(&["h"], &[("3600", 1)], TIME),
    alone(&["d"], &[("86400", 1)], TIME),
    angle(&["deg", "°"], &[("180", -1)], NUMBER),
    angle(&["arcmin"], &[("10800", -1)], NUMBER),
    angle(&["arcsec"], &[("648000", -1)], NUMBER),
    with_prefixes(&["L", "l"], &[("1000", -1)], VOLUME),
    with_prefixes(&["t"], &[("1000", 1)], MASS),
    alone(&["ha"], &[("10000", 1)], AREA),
    alone(&["au"], &[("149597870700", 1)], LENGTH),
    with_prefixes(&["eV"], &[("1.602176634e-19", 1)], ENERGY),
    // Angles and shares.
    angle(&["gon"], &[("200", -1)], NUMBER),
    angle(&["rev", "turn"], &[("2", 1)], NUMBER),
    angle(&["rpm"], &[("30", -1)], RATE),
    alone(&["%"], &[("100", -1)], NUMBER),
    alone(&["ppm"], &[("1e-6", 1)], NUMBER),
    // Lengths.
    alone(&["in"], &[("0.0254", 1)], LENGTH),
    alone(&["mil"], &[("0.0000254", 1)], LENGTH),
    alone(&["ft"], &[FOOT], LENGTH),
    alone(&["yd"], &[("0.9144", 1)], LENGTH),
    alone(&["mi"], &[("1609.344", 1)], LENGTH),
    alone(&["nmi"], &[("1852", 1)], LENGTH),
    alone(&["Å", "angstrom"], &[("1e-10", 1)], LENGTH),
    alone(&["ly"], &[("9460730472580800", 1)], LENGTH),
    Entry { names: &["pc"], factor: &[("648000", 1), ("149597870700", 1)], pi_power: -1, dimension: LENGTH, prefixes: true },
    // Areas and volumes; the acre is the international one, the gallon that of the United States.
    alone(&["acre"], &[("4046.8564224", 1)], AREA),
    alone(&["gal"], &[("0.0254", 3), ("231", 1)], VOLUME),
    // Masses.
    alone(&["lb"], &[POUND], MASS),
    alone(&["oz"], &[POUND, ("16", -1)], MASS),
    alone(&["slug"], &[POUND, GRAVITY, ("0.3048", -1)], MASS),
    // Speeds.
    alone(&["mph"], &[("1609.344", 1), ("3600", -1)], SPEED),
    alone(&["kn"], &[("1852", 1), ("3600", -1)], SPEED),
    // Forces and pressures; mmHg is the conventional one.
    alone(&["dyn"], &[("1e-5", 1)], FORCE),
    alone(&["kgf"], &[GRAVITY], FORCE),
    alone(&["lbf"], &[POUND, GRAVITY], FORCE),
    alone(&["kip"], &[POUND, GRAVITY, ("1000", 1)], FORCE),
    with_prefixes(&["bar"], &[("100000", 1)], PRESSURE),
    alone(&["atm"], &[("101325", 1)], PRESSURE),
    alone(&["Torr"], &[("101325", 1), ("760", -1)], PRESSURE),
    alone(&["mmHg"], &[("133.322387415", 1)], PRESSURE),
    alone(&["psi"], &[POUND, GRAVITY, ("0.0254", -2)], PRESSURE),
    alone(&["ksi"], &[POUND, GRAVITY, ("0.0254", -2), ("1000", 1)], PRESSURE),
    alone(&["psf"], &[POUND, GRAVITY, ("0.3048", -2)], PRESSURE),
    // Energies and powers; the calorie is the thermochemical one, the Btu that of the International Table.
    alone(&["erg"], &[("1e-7", 1)], ENERGY),
    with_prefixes(&["Wh"], &[("3600", 1)], ENERGY),
    with_prefixes(&["cal"], &[("4.184", 1)], ENERGY),
    alone(&["Btu"], &[("1055.05585262", 1)], ENERGY),
    alone(&["hp"], &[("550", 1), FOOT, POUND, GRAVITY], POWER),
    // Viscosities.
    with_prefixes(&["P"], &[("0.1", 1)], dimension(-1, 1, -1, 0, 0, 0, 0)),
    with_prefixes(&["St"], &[("0.0001", 1)], dimension(2, 0, -1, 0, 0, 0, 0)),
];

/// SI prefixes with their powers of ten. `u` stands for `μ` where that cannot be typed.
const PREFIXES: &[(&str, i64)] = &[
    ("da", 1),
    ("h", 2),
    ("k", 3),
    ("M", 6),
    ("G", 9),
    ("T", 12),
    ("P", 15),
    ("E", 18),
    ("Z", 21),
    ("Y", 24),
    ("R", 27),
    ("Q", 30),
    ("d", -1),
    ("c", -2),
    ("m", -3),
    ("μ", -6),
    ("u", -6),
    ("n", -9),
    ("p", -12),
    ("f", -15),
    ("a", -18),
    ("z", -21),
    ("y", -24),
    ("r", -27),
    ("q", -30),
];

/// The unit `name`; a name of the table goes before one with a prefix.
pub(super) fn find(name: &str) -> Option<NamedUnit> {
    let named = |name: &str| TABLE.iter().find(|entry| entry.names.contains(&name));
    if let Some(entry) = named(name) {
        return entry.with_prefix(0);
    }
    PREFIXES.iter().find_map(|(prefix, power)| {
        let entry = named(name.strip_prefix(prefix)?)?;
        if entry.prefixes { entry.with_prefix(*power) } else { None }
    })
}

impl Entry {
    fn with_prefix(&self, power_of_ten: i64) -> Option<NamedUnit> {
        let mut factor = Exact::fraction(10, 1)?.power(power_of_ten)?;
        for (decimal, power) in self.factor {
            factor = factor.multiply(&Exact::parse_decimal(decimal)?.power(*power)?)?;
        }
        Some(NamedUnit { dimension: self.dimension, factor, pi_power: self.pi_power })
    }
}

/// Names to compare a misspelt one with: all of the table, and those with the prefixes in common use.
pub(super) fn common_names() -> Vec<String> {
    let names = || TABLE.iter().flat_map(|entry| entry.names.iter().map(move |name| (entry.prefixes, *name)));
    let prefixed = names().filter(|(prefixes, _)| *prefixes);
    let prefixed =
        prefixed.flat_map(|(_, name)| ["k", "m", "c", "M", "G", "μ", "n", "h"].map(|p| format!("{p}{name}")));
    names().map(|(_, name)| name.to_owned()).chain(prefixed).collect()
}

/// The symbol of a unit that was written in words or by a symbol that is not in use here.
pub(super) fn symbol_of(word: &str) -> Option<&'static str> {
    let lower = word.to_lowercase();
    let singular = lower.strip_suffix('s').unwrap_or(&lower);
    let found = WORDS.iter().find(|(written, _)| *written == lower || *written == singular);
    found.map(|(_, symbol)| *symbol)
}

const WORDS: &[(&str, &str)] = &[
    ("meter", "m"),
    ("metre", "m"),
    ("millimeter", "mm"),
    ("millimetre", "mm"),
    ("centimeter", "cm"),
    ("centimetre", "cm"),
    ("kilometer", "km"),
    ("kilometre", "km"),
    ("micron", "μm"),
    ("inch", "in"),
    ("inches", "in"),
    ("foot", "ft"),
    ("feet", "ft"),
    ("yard", "yd"),
    ("mile", "mi"),
    ("gram", "g"),
    ("kilogram", "kg"),
    ("tonne", "t"),
    ("ton", "t"),
    ("pound", "lb"),
    ("lbs", "lb"),
    ("ounce", "oz"),
    ("second", "s"),
    ("sec", "s"),
    ("minute", "min"),
    ("hour", "h"),
    ("hr", "h"),
    ("day", "d"),
    ("degree", "deg"),
    ("radian", "rad"),
    ("revolution", "rev"),
    ("percent", "%"),
    ("newton", "N"),
    ("pascal", "Pa"),
    ("joule", "J"),
    ("watt", "W"),
    ("volt", "V"),
    ("ampere", "A"),
    ("amp", "A"),
    ("coulomb", "C"),
    ("hertz", "Hz"),
    ("kelvin", "K"),
    ("degk", "K"),
    ("liter", "L"),
    ("litre", "L"),
    ("gallon", "gal"),
    ("hectare", "ha"),
    ("knot", "kn"),
    ("kph", "km/h"),
    ("kmh", "km/h"),
    ("cc", "cm^3"),
    ("sqm", "m^2"),
    ("sqft", "ft^2"),
    ("cumec", "m^3/s"),
];
