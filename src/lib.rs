//! The bench of an engineer who puts an amplitude-varying signal through a switching power stage.
//!
//! The folders tell the data's journey; each hands one type to the next, and imports only what
//! stands above it (`tests/layering.rs` holds the table):
//!
//! | step | module | product |
//! |---|---|---|
//! | | [`math`], [`units`], [`input`] | numbers without physics, text with units, files with positions |
//! | 1 | [`stage`] | `Stage`: what the hardware is |
//! | 2 | [`orbit`] | `Orbit`: what it does every period |
//! | | [`design`] | targets to the parts of a stage |
//! | 3 | [`map`] | `Map`: control to output, forward and inverse |
//! | | [`signal`] | `Source`: the wanted baseband, from files and generators |
//! | 4 | [`drive`] | the controls over time that a scheme makes of a signal |
//! | 5 | [`transmit`] | the complex envelope that leaves the stage |
//! | 6 | [`metrics`] | numbers about the output |
//! | | [`limits`] | published limit sets and the user's own |
//! | 7 | [`verdict`] | numbers against limits |
//! | | [`predistort`] | tables and polynomials that undo what the stage does |
//! | | [`study`] | one study from file to verdict |
//! | | [`report`] | results to bytes: text, JSON, CSV, HTML, pictures |
//! | | [`cli`] | the only module that opens files, reads the environment or prints |
//!
//! # Conventions
//!
//! * SI units inside; prefixes only at the edges. Units stand in names: `supply_v`, `period_s`.
//! * Phasors are peak: `v(t) = Re(V exp(+j 2 pi f t))`. `t = 0` is the middle of the switch's closed
//!   interval at zero drive phase.
//! * Complex baseband: `v(t) = Re(x(t) exp(+j 2 pi f t))`; power into a load `R` is `|x|^2 / (2 R)`.
//! * Spectra are two-sided densities over the offset from the carrier, in W/Hz, lowest offset first.
//! * EVM in percent RMS of the reference's RMS. ACPR in dB, negative is below the channel. Margins
//!   in dB, positive is within the limit.
//! * FFTs are unscaled in both directions, as in rustfft.
//! * Random numbers come from a stated seed; the same study and seed give the same bytes.

pub mod cli;
pub mod design;
pub mod drive;
pub mod input;
pub mod limits;
pub mod map;
pub mod math;
pub mod metrics;
pub mod orbit;
pub mod predistort;
pub mod report;
pub mod signal;
pub mod stage;
pub mod study;
pub mod transmit;
pub mod units;
pub mod verdict;
