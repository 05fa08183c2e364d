//! Holding estimates against something: published tables, limits.

pub mod compare;
pub mod suspects;
