//! Units of measurement: dimensions as powers of the SI base units, and named units with their factors.

use crate::expression::Exact;

/// Powers of metre, kilogram, second, ampere, kelvin, mole, candela, each as numerator over a common denominator of
/// [`Dimension::DENOMINATOR`], so that `sqrt` of a unit stays exact.
#[derive(Clone, Copy, PartialEq, Eq, Hash, Debug, Default)]
pub struct Dimension(pub [i16; 7]);

impl Dimension {
    /// Exponents are multiples of 1/12.
    pub const DENOMINATOR: i16 = 12;

    /// A plain number.
    pub const NONE: Dimension = Dimension([0; 7]);
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
