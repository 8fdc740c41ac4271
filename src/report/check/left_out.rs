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

/// What it leaves out, the stage's own model included.
pub(super) fn model_limits(result: &CheckResult) -> Vec<String> {
    let mut limits: Vec<String> = MODEL_LIMITS.iter().map(|text| (*text).to_owned()).collect();
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
            "The stage is linear between switching instants: fixed capacitances, a switch with one closed resistance \
             that opens and closes at once, no diode, no gate coupling, no temperature. Its supply map is therefore \
             straight; what bends the signal here are the floor, the modulator and the paths."
                .to_owned(),
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
