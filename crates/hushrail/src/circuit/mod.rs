//! Node voltages of networks of devices.

pub mod eliminate;
pub mod network;
pub mod newton;
pub mod plan;
