//! What a reader of the result must know besides, with advice.

use std::fmt;

use crate::units::show;

/// Something that limits how far the result can be trusted.
#[derive(Debug, Clone, PartialEq)]
pub enum Warning {
    /// Finer sampling moves the margins.
    NotConverged {
        /// Largest movement of any margin, dB.
        moved_db: f64,
        /// Oversampling of the result.
        factor: usize,
    },
    /// The finest rate was reached before sampling was fine enough for the imperfections.
    RateLimited {
        /// Oversampling of the result.
        factor: usize,
    },
    /// The control left the map.
    HeldAtEdge {
        /// Part of all instants.
        fraction: f64,
    },
    /// The stage goes below ground, where a real device conducts, and has no diode.
    DiodeWouldConduct {
        /// Lowest drain voltage at full supply, V.
        lowest_v: f64,
    },
    /// Points of the map have no orbit.
    PointsFailed {
        /// How many.
        count: usize,
        /// Why the first of them failed.
        reason: String,
    },
    /// The map assumes that the stage settles at once.
    SlowStage {
        /// Settling time of the stage, s.
        settling_s: f64,
        /// Sample period of the signal, s.
        signal_s: f64,
    },
    /// Map and replay give different answers.
    MapMisleads {
        /// Largest movement of any margin, dB; infinite where a check is decided in only one of them.
        moved_db: f64,
        /// The check that moved most.
        check: String,
        /// Whether the two verdicts differ as well.
        other_verdict: bool,
    },
    /// A replayed stage whose choke is ideal.
    IdealChoke,
    /// A scheme that is not replayed among others that are.
    OnlyByMap {
        /// Its name.
        scheme: &'static str,
        /// Why not.
        reason: String,
    },
    /// Stated time constants of the gate, where the stage has its own.
    OwnTransitions,
    /// A map from a file knows neither stress nor memory.
    MapFromFile {
        /// What it cannot answer.
        missing: Vec<&'static str>,
    },
    /// Pulses of the deepest notch are narrower than the hardware makes them well.
    GridTooCoarse {
        /// Pulse asked for in the notch, s.
        notch_s: f64,
        /// Grid of the edges, s; 0 for none.
        grid_s: f64,
        /// Shortest pulse, s.
        shortest_s: f64,
    },
    /// Output does not rise up to full width.
    WidthTurns {
        /// From this width on it falls.
        width: f64,
    },
    /// Several switches, one of which goes beyond a rail.
    BeyondRails {
        /// Lowest voltage across a switch, V.
        lowest_v: f64,
    },
    /// Joined branches neither add up at angle 0 nor cancel at a quarter turn.
    AngleReach {
        /// The angle of full output, degrees.
        full_deg: f64,
        /// Output at a quarter turn, dB below full.
        lowest_db: f64,
    },
    /// The sampled band reaches past the carrier.
    WiderThanCarrier {
        /// Farthest offset that is sampled, Hz.
        span_hz: f64,
        /// Hz
        carrier_hz: f64,
    },
    /// The deepest notch lies below the narrowest pulse that the map knows.
    NotchBelowMap {
        /// The notch, as a part of full output.
        notch: f64,
        /// The lowest output of the map, likewise.
        lowest: f64,
    },
    /// Ripple that the stage does not follow at once.
    RippleFasterThanStage {
        /// Of the ripple, Hz.
        frequency_hz: f64,
        /// Settling time of the stage, s.
        settling_s: f64,
    },
    /// Rails that change faster than the stage settles.
    RailsFasterThanStage {
        /// Time to 1 % of a rail, s.
        rail_s: f64,
        /// Settling time of the stage, s.
        settling_s: f64,
    },
    /// Branches whose phase moves faster than the stage follows at once.
    BranchesFasterThanStage {
        /// Settling time of the stage, s.
        settling_s: f64,
        /// Time in which the branches move, s.
        branch_s: f64,
    },
    /// Branches too unequal to draw the same.
    UnequalBranches {
        /// dB
        gain_db: f64,
    },
    /// Edges of the gate that the map cannot answer for.
    HurriedGate {
        /// Part of all edges.
        fraction: f64,
        /// Shortest time between two of them, s.
        shortest_s: f64,
        /// Until 1 % is left of a transition, s.
        transition_s: f64,
    },
    /// The stage's transitions are more than one or two modes.
    PoorTransition {
        /// Part left, RMS.
        left: f64,
    },
    /// The error of noise shaping ran away.
    OverloadedShaping {
        /// Ticks at which it was cut.
        ticks: u64,
    },
    /// A pulse sequence does not last as long as the signal.
    PulsesOfOtherLength {
        /// When it ends, s.
        end_s: f64,
        /// When the signal ends, s.
        signal_s: f64,
    },
    /// The lines of the bursts lie outside what is sampled.
    BurstsOutOfSight {
        /// Rate of the bursts, Hz.
        rate_hz: f64,
        /// Highest offset that is seen, Hz.
        seen_hz: f64,
    },
    /// Few averages.
    FewAverages {
        /// Segments averaged.
        segments: u64,
    },
    /// Peaks of the signal past full scale.
    AboveFullScale {
        /// Highest magnitude, full scale 1.
        peak: f64,
    },
    /// Anything that the limits say.
    Limits(String),
}

impl fmt::Display for Warning {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::NotConverged { moved_db, factor } => write!(
                f,
                "sampling is not fine enough: from {}x to {factor}x oversampling a margin moved by {moved_db:.2} dB (0.1 dB is allowed). Treat margins as uncertain by that much",
                factor / 2
            ),
            Self::RateLimited { factor } => write!(
                f,
                "the imperfections ask for finer sampling than the highest factor of {factor}: check that their bandwidths and frequencies are meant"
            ),
            Self::HeldAtEdge { fraction } => write!(
                f,
                "the control left the map at {} of all instants and was held at its edge: lower the level or extend the map",
                percent(*fraction)
            ),
            Self::DiodeWouldConduct { lowest_v } => write!(
                f,
                "at full supply the drain swings down to {}: a real device's body diode would conduct there and clamp it; the stage file has no diode",
                show(*lowest_v, "V", 3)
            ),
            Self::PointsFailed { count, reason } => write!(
                f,
                "points of the map without an orbit: {count} (the first: {reason}). Nothing is interpolated over them; a control that falls there is held at the nearest point that was solved"
            ),
            Self::SlowStage {
                settling_s,
                signal_s,
            } => write!(
                f,
                "the stage settles in {} while the signal changes every {}: the map assumes that it settles at once, so memory is missing from this result; a linear stage has it with --by replay",
                show(*settling_s, "s", 3),
                show(*signal_s, "s", 3)
            ),
            Self::MapMisleads {
                moved_db,
                check,
                other_verdict,
            } => {
                let verdict = match other_verdict {
                    true => "; its verdict is another one",
                    false => "",
                };
                if moved_db.is_finite() {
                    write!(
                        f,
                        "the map misleads here: {check} differs by {moved_db:.2} dB between map and replay (0.5 dB is taken as agreement){verdict}. Judge this study by replay"
                    )
                } else {
                    write!(
                        f,
                        "the map misleads here: {check} is decided in only one of map and replay{verdict}. Judge this study by replay"
                    )
                }
            }
            Self::IdealChoke => f.write_str(
                "the feed is an ideal choke: its current is taken to follow the supply at once, so that the memory of a real choke is missing. Give the feed an `inductance` to see it",
            ),
            Self::OnlyByMap { scheme, reason } => write!(
                f,
                "the scheme {scheme} is not replayed: its numbers are by map. {reason}"
            ),
            Self::OwnTransitions => f.write_str(
                "`rise` and `fall` of the scheme are not used: a replayed stage rises and falls as its network does",
            ),
            Self::MapFromFile { missing } => write!(
                f,
                "the map came from a file: {} cannot be answered from it",
                missing.join(", ")
            ),
            Self::GridTooCoarse {
                notch_s,
                grid_s,
                shortest_s,
            } => write!(
                f,
                "the time grid is too coarse for the notch: the deepest one asks for a pulse of {}, the grid is {} (at least ten steps are wanted) and the shortest pulse {}. This scheme cannot follow the signal there",
                show(*notch_s, "s", 3),
                show(*grid_s, "s", 3),
                show(*shortest_s, "s", 3)
            ),
            Self::WidthTurns { width } => write!(
                f,
                "the output falls past a width of {width:.4}: full output is taken there, wider pulses are not used"
            ),
            Self::BeyondRails { lowest_v } => write!(
                f,
                "a switch sees down to {} across it: a real one's body diode would conduct and clamp it, which this model leaves out",
                show(*lowest_v, "V", 3)
            ),
            Self::AngleReach { full_deg, lowest_db } => write!(
                f,
                "the joined branches give most at {full_deg:.1} deg, where full output is taken, and {lowest_db:.1} dB of it at 90 deg, the least that is asked of them: magnitudes below that are held there"
            ),
            Self::WiderThanCarrier {
                span_hz,
                carrier_hz,
            } => write!(
                f,
                "sampled out to {} from a carrier of {}: a complex baseband is no model past half of the carrier; far segments are uncertain",
                show(*span_hz, "Hz", 4),
                show(*carrier_hz, "Hz", 4)
            ),
            Self::NotchBelowMap { notch, lowest } => write!(
                f,
                "the deepest notch lies {:.1} dB below full output, the narrowest pulse of the map {:.1} dB: below it the output is held",
                -20.0 * notch.max(1e-30).log10(),
                -20.0 * lowest.log10()
            ),
            Self::RippleFasterThanStage {
                frequency_hz,
                settling_s,
            } => write!(
                f,
                "the stage settles in {}, too slowly to follow a ripple of {} at once: its sidebands are overstated by map; use --by replay",
                show(*settling_s, "s", 3),
                show(*frequency_hz, "Hz", 4)
            ),
            Self::RailsFasterThanStage { rail_s, settling_s } => write!(
                f,
                "a rail settles in {} and the stage itself in {}: by map the stage follows at once, so what its network does to the steps is missing; use --by replay",
                show(*rail_s, "s", 3),
                show(*settling_s, "s", 3)
            ),
            Self::BranchesFasterThanStage {
                settling_s,
                branch_s,
            } => write!(
                f,
                "the branches move within about {} and a stage settles in {}: the map assumes that it follows at once; use --by replay",
                show(*branch_s, "s", 3),
                show(*settling_s, "s", 3)
            ),
            Self::UnequalBranches { gain_db } => write!(
                f,
                "branches that differ by {gain_db:.2} dB: the weaker one is taken to draw as much as the other, so that the efficiency is understated"
            ),
            Self::HurriedGate {
                fraction,
                shortest_s,
                transition_s,
            } => write!(
                f,
                "{:.2} % of the gate's edges come before the stage has settled from the last one ({} until 1 % is left; the shortest interval is {}): their transitions are only added up, which this result is uncertain by. Lower the burst rate; a linear stage has them with --by replay",
                100.0 * fraction,
                show(*transition_s, "s", 3),
                show(*shortest_s, "s", 3)
            ),
            Self::PoorTransition { left } => write!(
                f,
                "one or two modes leave {} of the stage's rise or fall (RMS): its transitions are known to that only",
                percent(*left)
            ),
            Self::OverloadedShaping { ticks } => write!(
                f,
                "noise shaping was overloaded at {ticks} ticks, where its error was cut: lower the level, take more levels or the first order"
            ),
            Self::PulsesOfOtherLength { end_s, signal_s } => write!(
                f,
                "the pulse sequence ends at {}, the signal at {}: beyond its end the gate keeps its last level",
                show(*end_s, "s", 5),
                show(*signal_s, "s", 5)
            ),
            Self::BurstsOutOfSight { rate_hz, seen_hz } => write!(
                f,
                "no filter stands behind the stage, so that the lines of the bursts, multiples of {}, leave it: those up to {} are seen, and power and margins move with every line that finer sampling shows",
                show(*rate_hz, "Hz", 4),
                show(*seen_hz, "Hz", 4)
            ),
            Self::FewAverages { segments } => write!(
                f,
                "the spectrum averages only {segments} segments, so that each reading is uncertain by about {:.1} dB: use a longer signal",
                4.34 / (*segments as f64).sqrt()
            ),
            Self::AboveFullScale { peak } => write!(
                f,
                "the signal reaches {peak:.3} of full scale: what lies above the supply's range is clipped; lower the level"
            ),
            Self::Limits(text) => f.write_str(text),
        }
    }
}

impl serde::Serialize for Warning {
    fn serialize<S: serde::Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        serializer.collect_str(self)
    }
}

/// A part of a whole in percent.
fn percent(part: f64) -> String {
    if part > 0.0 && part < 5e-5 {
        "less than 0.01 %".to_owned()
    } else {
        format!("{:.2} %", 100.0 * part)
    }
}
