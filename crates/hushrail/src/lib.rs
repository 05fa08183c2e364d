//! hushrail computes the standby current of power-gated CMOS blocks.

#![forbid(unsafe_code)]

pub mod batch;
pub mod block;
pub mod cell;
pub mod check;
pub mod circuit;
pub mod corner;
pub mod device;
pub mod physics;
pub mod read;
pub mod standby;
