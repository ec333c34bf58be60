//! `rayloom._core`: checks and borrows arrays, calls one core function through
//! one [`gate`], wraps the result. No algorithm lives here.

// The methods below take what numpy hands over; pyo3 needs owned arguments.
#![allow(clippy::needless_pass_by_value)]

mod earth;
mod gate;
mod products;
mod rays;

use pyo3::prelude::*;

#[pymodule]
fn _core(module: &Bound<'_, PyModule>) -> PyResult<()> {
    earth::register(module)?;
    products::register(module)?;
    rays::register(module)
}
