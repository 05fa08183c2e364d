//! Standby: what is done to a domain asleep, where its rails come to rest, what it still draws.
//!
//! # What a scheme may be made of
//!
//! Parts combine; each is a key of a `[[scheme]]` in a study or a field of [`Scheme`]. The literature named under "stops" is
//! cited from memory where no other word is said.
//!
//! | part | key | changes | costs | stops |
//! |---|---|---|---|---|
//! | header, footer, both | `header`, `footer` | the block hangs on a virtual rail that falls away | width, droop, wake-up, lost state | both in series: twice the resistance for little more (Mutoh et al., JSSC 1995) |
//! | high- or low-threshold switch | `model` | off-current against on-resistance | masks | high thresholds no longer switch on below about 0.5 to 0.6 V (Mutoh et al., JSSC 1995) |
//! | stacked switch | `stacked` | off devices in series: the node between reverse-biases them | twice the resistance | where GIDL or gate current of the outer device rules |
//! | overdrive asleep (super cut-off) | `overdrive_v` | channel current falls a decade a swing | pump, oxide stress | GIDL floor (Kawaguchi et al., 1998/2000) and the oxide rule |
//! | boost awake | `boost_v` | on-resistance | pump while awake, stress over the whole channel | thick oxide needed (Inukai et al., CICC 2000) |
//! | well bias of the switch | `well_bias_v`, `awake_well_bias_v` (negative: forward) | its threshold | generator, well charge | band-to-band tunnelling (Keshavarzi et al., 1999) |
//! | well bias of the block | `nwell_bias_v`, `pwell_bias_v`, `awake_nwell_bias_v`, `awake_pwell_bias_v`, `nwell`, `pwell` | thresholds of the block | triple well, slow transitions | the same, sooner on newer processes; forward below 0.5 V (Narendra et al., JSSC 2003) |
//! | body tied to gate | `body_to_gate` | threshold follows the gate | a well of its own | supplies below about 0.6 V only (Assaderaghi et al., 1994) |
//! | clamped rail, state kept | `header_clamp`, `footer_clamp` | the rail stops at a diode or follower | the clamp's width; the clamped block leaks | the clamp level follows the logarithm of the leakage (Kumagai et al., VLSI 1998) |
//! | source bias, second supply | `held_supply_v`, `held_ground_v` | the rail rests at a level chosen | a supply, its losses | the retention voltage of what must be kept |
//! | several depths of sleep | several schemes of a domain | saving against wake-up | a bias for each | gains of the order of 17 % over one depth (Agarwal et al., ISQED 2006, abstract read) |
//! | zigzag rows | `zigzag` with both switches and `parked` | header for outputs at zero, footer for outputs at one; every output keeps a real rail | two switches, forced states | gate tunnelling: every gate keeps on devices under full bias (Drazdziulis and Larsson-Edefors, ISCAS 2004, abstract read) |
//! | parked inputs | `parked` | stacks instead of single off devices | the vector, one transition in and out | depth of logic (Halter and Najm, CICC 1997) |
//! | forced stacks in cells | `changes` … `stack` | two of half width for one | drive falls to about a quarter | off critical paths only (Narendra et al., 2001) |
//! | longer channels in cells | `changes` … `lengthen_m` | threshold roll-off, DIBL | delay, gate capacitance and gate current | where the reverse short-channel effect is flat (Gupta et al., DAC 2004) |
//! | two thresholds by count | `changes` … `models`, `share` | threshold of the cells with slack | masks, slack | the share of cells on critical paths (Wei et al., DAC 1998) |
//! | retention registers, islands | `powered` | what must not sleep stays on the real rails | it leaks as if nothing were switched | its share of the current left |
//! | isolation, added cells | `added` | cells around the domain, always powered | area, their leakage | as above |
//! | pump and bias generators | `overhead_a`, `pump_efficiency` | what the above takes to make | itself | counts in every total and in every optimum |
//!
//! Oxide stress, junction breakdown and lifetime are the foundry's rules; see [`stress`].

mod account;
pub mod clamp;
pub mod curve;
pub mod rest;
pub mod scheme;
pub mod stress;
pub mod switch;

pub use clamp::{Clamp, ClampSpec};
pub use rest::{Asleep, PathShare, RestError, SupplyCurrent, rest_rails, settle, settle_with};
pub use scheme::{Scheme, SwitchSpec, WellTie};
pub use stress::{StressLimits, SwitchStress};
pub use switch::Switch;
