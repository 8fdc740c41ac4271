//! What a person must know before switching on or relying on a verdict.

/// Cautions that stand in every report.
pub const CAUTIONS: [&str; 6] = [
    "High drain voltages: a switching stage puts several times its supply voltage on the drain (about 3.6 \
     times for a nominal class E stage, more when it is detuned or the load is lost). Rate the switch, the \
     capacitors and the insulation for the peak, not for the supply.",
    "RF burns and exposure: do not touch the drain node, the load network or the antenna while the stage is on. \
     Keep to the exposure limits that hold where you are.",
    "Dummy load first: run every new setting, table or signal into a dummy load and look at its spectrum there \
     before an antenna is connected.",
    "A licence is needed to transmit in most bands, by you or by the user of the equipment.",
    "A verdict of this program is an estimate from a model or from a recording. It is no measurement of the \
     equipment and no type approval.",
    "Local rules and accredited laboratories decide. Limits change; compare the ones used here with the edition \
     in force.",
];
