//! Steps of an ordinary differential equation with error estimate and dense output. Knows nothing of launches.
//!
//! Why not a crate: see DEVELOPERS.md, "The integrator"; in short, none can change the independent variable between
//! steps, which is how a step lands on a card knot without a search (M. Hénon, *On the numerical computation of
//! Poincaré maps*, Physica D 5 (1982) 412-414).

mod coefficients;
mod step;
mod stiff;

pub use step::{Dense, Order, Step, Tolerance};
