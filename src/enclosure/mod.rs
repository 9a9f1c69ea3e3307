//! Proved ranges of formulas over boxes.
//!
//! An [`Interval`] is a closed set of real numbers whose ends are doubles; every operation rounds outward, so that the
//! result contains all that the operation can give. An [`Image`] is the range of a formula over a box together with
//! what is proved about where it is defined and continuous. [`Ranges`] evaluates whole formulas, [`Centred`] uses their
//! derivatives for a tighter range over small boxes. The range may be too wide, and `Partly` may only mean that a proof
//! was not found; a range is never too narrow.

mod centred;
mod elementary;
mod evaluate;
mod functions;
mod image;
mod interval;
mod power;
mod rounding;
mod special;

pub use centred::{Centred, centred};
pub use evaluate::{Ranges, enclose, enclose_one};
pub use functions::{image_of, image_of_two};
pub use image::{Defined, Image, Truth};
pub use interval::Interval;
pub use power::{integer_power, power, rational_power};
