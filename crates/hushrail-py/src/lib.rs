//! The Python binding of hushrail: conversion, errors, the interpreter lock and interrupts, nothing else.

#![expect(clippy::needless_pass_by_value, reason = "signatures that the border takes")]

mod awake;
mod device;
mod error;
mod intent;
mod liberty;
mod optimum;
mod own;
mod run;
mod study;

use pyo3::prelude::*;

/// The compiled core of hushrail.
#[pymodule(gil_used = false)]
mod _core {
    use super::{Bound, PyModule, PyModuleMethods, PyResult};

    #[pymodule_export]
    use crate::awake::{awake_domains, awake_droop, awake_figure, awake_keep, awake_margins, awake_rail};
    #[pymodule_export]
    use crate::device::{Device, Process};
    #[pymodule_export]
    use crate::intent::{map_intent, read_intent};
    #[pymodule_export]
    use crate::liberty::{liberty_of_table, liberty_text, read_liberty};
    #[pymodule_export]
    use crate::optimum::{choices_asked, choose, optima_asked, optimum};
    #[pymodule_export]
    use crate::own::{CellTable, CompactModel, TableModel};
    #[pymodule_export]
    use crate::study::{
        cell_table, compare, count, domain_states, estimate, oxide_lifetime, park, sensitivities, transitions,
    };

    #[pymodule_init]
    fn init(m: &Bound<'_, PyModule>) -> PyResult<()> {
        m.add("__version__", env!("CARGO_PKG_VERSION"))
    }
}
