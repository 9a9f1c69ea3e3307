//! Surface integrals from formulas: exact derivatives, compiled kernels, quadrature with an error that is true.
//!
//! A sheet is a short text with a map phi(u, v), its region and the questions. Checking it gives a [`language::Model`],
//! binding its parameters [`language::Bindings`], and [`integrals::answer`] the answers.
//!
//! ```
//! use quadrel::integrals::{NoProgress, Settings, answer};
//! use quadrel::language::{Source, check};
//!
//! let sheet = "
//!     R = 3
//!     r = 1
//!     torus(u, v) = ((R + r*cos(v))*cos(u), (R + r*cos(v))*sin(u), r*sin(v)) on u in [0, 2*pi], v in [0, 2*pi]
//!     skin = area(torus)
//! ";
//! let model = check(Source::new("torus.sheet", sheet))?;
//! let bindings = model.bind(&[])?;
//! let answers = answer(&model, &bindings, &[], &Settings::default(), &NoProgress)?;
//! let skin = &answers[0].components[0];
//! // Pappus-Guldinus: 4 pi^2 R r
//! let exact = 12.0 * std::f64::consts::PI.powi(2);
//! assert!((skin.value - exact).abs() <= skin.error);
//! # Ok::<(), Box<dyn std::error::Error>>(())
//! ```
//!
//! The modules are the stages of the pipeline, in this order; each uses only those before it.

pub mod expression;

pub mod calculus;

pub mod language;

pub mod enclosure;

pub mod simplify;

pub mod geometry;

pub mod kernel;

pub mod quadrature;

pub mod integrals;

pub mod report;

pub mod cli;
