//! Python binding of `hushrail`: the private module `hushrail._core`.

use pyo3::prelude::pymodule;

/// What the Python package takes from the core crate.
#[pymodule(gil_used = false)]
mod _core {
    #[pymodule_export]
    #[expect(non_upper_case_globals, reason = "Python spells it so")]
    const __version__: &str = env!("CARGO_PKG_VERSION");
}
