//! Map phi(u, v) to tangents, normal, area element, fundamental forms, curvatures, and to the densities of integrals.

mod content;
mod density;
mod surface;

pub use density::{at_point, density, flux_density, volume_density};
pub use surface::{Curvature, FirstForm, SecondForm, Surface};
