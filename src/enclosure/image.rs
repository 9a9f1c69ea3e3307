//! The range of a formula over a box, with what is proved about it.

use super::interval::Interval;

/// Where in a box a formula is defined.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub enum Defined {
    /// Proved: at no point of the box.
    Nowhere,
    /// Perhaps at some points and not at others; nothing is proved.
    Partly,
    /// Proved: at every point of the box.
    Everywhere,
}

impl Defined {
    /// For an operation on two operands: what is known when both must be defined.
    pub fn and(self, other: Defined) -> Defined {
        self.min(other)
    }

    /// For a choice that is not decided: what is known when either may be taken.
    pub fn or_else(self, other: Defined) -> Defined {
        if self == other { self } else { Defined::Partly }
    }
}

/// The answer to a comparison over a box.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Truth {
    /// It holds at every point where both sides are defined.
    True,
    /// It holds at no point.
    False,
    /// It holds at some points, or nothing is proved.
    Unknown,
}

impl Truth {
    /// The opposite answer.
    pub fn opposite(self) -> Truth {
        match self {
            Truth::True => Truth::False,
            Truth::False => Truth::True,
            Truth::Unknown => Truth::Unknown,
        }
    }

    /// Truth values are the numbers 1 and 0 in formulas.
    pub fn range(self) -> Interval {
        match self {
            Truth::True => Interval::ONE,
            Truth::False => Interval::ZERO,
            Truth::Unknown => Interval::UNIT,
        }
    }

    /// The truth that a range of the numbers 1 and 0 stands for.
    pub fn from_range(range: Interval) -> Truth {
        if range == Interval::ONE {
            Truth::True
        } else if range == Interval::ZERO {
            Truth::False
        } else {
            Truth::Unknown
        }
    }
}

/// The range of a formula over a box.
#[derive(Clone, Copy, PartialEq, Debug)]
pub struct Image {
    /// Contains the value at every point of the box where the formula is defined.
    pub range: Interval,
    /// Where in the box the formula is defined.
    pub defined: Defined,
    /// Whether it is proved to be continuous on the box (so also defined everywhere).
    pub continuous: bool,
    /// Whether it is proved never to be 0, even if `range` has an end at 0 (an open end that a condition gives).
    pub nonzero: bool,
}

impl Image {
    /// The image of a formula that is nowhere defined.
    pub const NOWHERE: Image =
        Image { range: Interval::EMPTY, defined: Defined::Nowhere, continuous: false, nonzero: true };

    /// A range; continuous if defined everywhere.
    pub fn new(range: Interval, defined: Defined) -> Image {
        let continuous = defined == Defined::Everywhere;
        Image { range, defined, continuous, nonzero: !range.contains(0.0) }
    }

    /// The range of a formula that is defined and continuous.
    pub fn everywhere(range: Interval) -> Image {
        Image::new(range, Defined::Everywhere)
    }

    /// Nothing known.
    pub fn unknown() -> Image {
        Image::new(Interval::ENTIRE, Defined::Partly)
    }

    /// The same range of a formula that may jump.
    pub(super) fn with_jumps(self) -> Image {
        Image { continuous: false, ..self }
    }

    /// The image of an operation, as found from the ranges of its operands, when these are only defined and continuous
    /// as `operands` says.
    pub(super) fn given(self, operands: &[Image]) -> Image {
        let defined = operands.iter().fold(self.defined, |defined, operand| defined.and(operand.defined));
        let continuous = self.continuous && operands.iter().all(|operand| operand.continuous);
        if defined == Defined::Nowhere { Image::NOWHERE } else { Image { defined, continuous, ..self } }
    }
}
