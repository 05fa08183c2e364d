//! hushrail computes what a power-gated block still draws: from the foundry's cards, the transistor netlists of the cells,
//! the instance counts of the chip and a list of sleep schemes and corners to the current of every real supply, split by
//! mechanism and path.
//!
//! The rooms, in the order data flows; a room uses those before it and none after it:
//!
//! - [`physics`], [`corner`]: constants with their sources; process, supply and temperature under one name.
//! - [`read`]: SPICE and CDL, structural Verilog, DEF, Liberty, power intent, count tables. Every record keeps its place; every error names file, line,
//!   column, what was found and what would be right.
//! - [`device`]: terminal currents by mechanism with exact derivatives, BSIM4 from the foundry's text, behind the trait
//!   [`device::Device`] that a model of your own may implement.
//! - [`circuit`]: node voltages of networks of devices, judged by current balance.
//! - [`cell`]: cells, their states (stored ones found by solving), the current of every terminal in every state.
//! - [`states`]: what every instance of a connected netlist holds while parked, and the vector that leaks least.
//! - [`block`]: counts × state weights × currents, as a function of rails and wells.
//! - [`standby`]: schemes, switches, the rest point of the virtual rails, every real supply.
//! - [`awake`]: what the switch costs while the domain works (on-resistance, droop, width, noise margins, delay), and what
//!   keeps stored values alive on a lowered rail.
//! - [`transition`]: waking and falling asleep, in-rush, bounce, energy of the round trip, break-even, duty.
//! - [`optimum`]: the best setting of a knob, one compromise over corners, the choice among schemes under limits.
//! - [`check`]: predictions against published tables.
//! - [`batch`]: study files, whole grids in parallel with the same bits for any number of threads, progress and stop.
//!
//! Units are SI and stand in the names (`_v`, `_a`, `_m`); temperatures offered to people are degrees Celsius (`temp_c`).
//! Currents are positive into a device or a cell.
//!
//! ```
//! use hushrail::device::Bias;
//! use hushrail::device::process::{Process, Request};
//! use hushrail::physics::Kelvin;
//! use hushrail::read::{DeckOptions, Place, Source};
//!
//! // an invented card; a foundry's file is read the same way with Source::open
//! let card = ".model nch nmos level=54 version=4.5 toxe=2n vth0=0.35 voff=-0.1 agidl=1e-7 bgidl=2.2e9 cgidl=1e-3";
//! let process = Process::read("tt", &[Source::from_text("card.lib", card)], &DeckOptions::default())?;
//! let request = Request {
//!     model: "nch".into(),
//!     params: vec![("w".into(), 1e-6), ("l".into(), 60e-9)],
//!     at: Place::new(&"example".into(), 1, 1),
//! };
//! let device = process.transistor(&request, Kelvin::from_celsius(25.0)?, &mut Vec::new())?.device;
//! let off = |overdrive: f64| device.branches(Bias { vgs: -overdrive, vds: 1.1, vbs: 0.0 }).terminals()[0];
//! assert!(off(0.2) < off(0.0) / 10.0); // super cut-off …
//! assert!(off(1.0) > off(0.2)); // … until GIDL takes over
//! # Ok::<(), Box<dyn std::error::Error>>(())
//! ```
//!
//! **Caution.** Results are estimates from the cards as given. Reliability limits (oxide voltage, junction breakdown) are the
//! foundry's, and silicon is signed off by the foundry's qualified flow.

#![forbid(unsafe_code)]

pub mod awake;
pub mod batch;
pub mod block;
pub mod cell;
pub mod check;
pub mod circuit;
pub mod corner;
pub mod device;
pub mod optimum;
pub mod physics;
pub mod read;
pub mod standby;
pub mod states;
pub mod transition;
