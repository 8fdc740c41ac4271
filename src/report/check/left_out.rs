//! What a check leaves out, in sentences.

use crate::study::{CheckResult, Hardware};

/// What the model leaves out of every check by map.
const MODEL_LIMITS: [&str; 4] = [
    "By map: the stage is taken to settle at once to the orbit of the present supply. Energy stored in its feed \
     and network, and so memory, is left out; the settling time in the facts says how long that is.",
    "The modulator is a chain of dead time, converter, Butterworth filter, slew limit and ripple; its efficiency is \
     one number plus idle power, whatever it delivers.",
    "The error vector is that of the waveform in the stated band after one complex gain and one delay were taken off, \
     not that of equalized symbols.",
    "Harmonics of the carrier are not part of the masks.",
];

/// What stands in place of the first where the stage was replayed.
const REPLAYED: &str = "By replay: the stage is integrated carrier cycle by carrier cycle from its state equations, so that \
     the memory of its feed and network is in every number. Within a cycle supply and edges move on straight lines; \
     between the track's instants they are interpolated. The largest voltages and currents of the switch and the \
     carrier's harmonics are those of orbits, not of the replay.";

/// What it leaves out, the stage's own model included.
pub(super) fn model_limits(result: &CheckResult) -> Vec<String> {
    let mut limits: Vec<String> = MODEL_LIMITS.iter().map(|text| (*text).to_owned()).collect();
    if result.replay.is_some() {
        REPLAYED.clone_into(&mut limits[0]);
    }
    let Hardware::Stage(stage) = &result.study.hardware else {
        return limits;
    };
    if stage.is_curved() {
        let parts = [
            (
                stage.drain_curve.is_some(),
                "capacitance that depends on the drain voltage",
            ),
            (stage.switch.diode.is_some(), "a diode"),
            (stage.gate_coupling_f > 0.0, "gate-drain coupling"),
            (
                stage.switch.knee.is_some(),
                "a limit of the closed switch's current",
            ),
        ];
        let present: Vec<&str> = parts
            .iter()
            .filter(|part| part.0)
            .map(|part| part.1)
            .collect();
        limits.insert(
            1,
            format!(
                "The stage is modelled with {}. It opens and closes at once, half-way up the gate's edges where \
                 these are given; the diode has no stored charge, no capacitance loses energy, and temperature is \
                 left out.",
                present.join(", ")
            ),
        );
    } else {
        limits.insert(
            1,
            format!(
                "The stage is linear between switching instants: fixed capacitances, {}, no diode, no gate coupling, \
                 no temperature. Its supply map is therefore straight; what bends a signal on the supply are the \
                 floor, the modulator, the paths and, where it is replayed, the stage's memory.",
                if stage.is_pair() {
                    "two switches with one closed resistance each that open and close at once, with dead time between"
                } else {
                    "a switch with one closed resistance that opens and closes at once"
                }
            ),
        );
    }
    limits.insert(
        2,
        if stage.driver.gate.is_some() {
            "Driver power is gate charge at the swing and the charge through the gate-drain coupling, drawn from a \
             rail at the swing; losses inside the driver are left out."
                .to_owned()
        } else {
            "No driver power is counted.".to_owned()
        },
    );
    limits
}
