//! A scheme's settings in words.

use super::text::quantity;
use crate::drive::{
    AngleLaw, BandShape, BurstScheme, Combining, Modulator, MovedEdges, PowerModel, Rails,
    Sampling, Scheme, StopBand, Updates, WidthLaw,
};
use crate::orbit::JointKind;

/// A scheme's settings, imperfections included.
pub fn scheme_rows(scheme: &Scheme) -> Vec<(String, String)> {
    let Scheme::Supply(supply) = scheme else {
        return settings(scheme);
    };
    let (modulator, path) = (&supply.modulator, &supply.phase_path);
    let own = |name: &str, value: String| (name.to_owned(), value);
    let band = |bandwidth_hz: Option<f64>, order: u32| {
        bandwidth_hz.map_or("ideal".to_owned(), |hz| {
            format!("{}, Butterworth of order {order}", quantity(hz, "Hz", 4))
        })
    };
    vec![
        own("kind", scheme.name().to_owned()),
        own(
            "floor",
            format!(
                "{} of the range, {:?}",
                supply.shaping.floor, supply.shaping.shape
            )
            .to_lowercase(),
        ),
        own(
            "modulator's response",
            match &modulator.response {
                None => band(modulator.bandwidth_hz, modulator.order),
                Some(response) => format!(
                    "{} poles, {} zeros, the fastest at {}",
                    response.poles.count(),
                    response.zeros.count(),
                    quantity(
                        response.poles.fastest().max(response.zeros.fastest())
                            / std::f64::consts::TAU,
                        "Hz",
                        4
                    )
                ),
            },
        ),
        own("modulator's dead time", quantity(modulator.delay_s, "s", 4)),
        own(
            "slew limit",
            modulator
                .slew_v_per_s
                .map_or("none".to_owned(), |slew| quantity(slew, "V/s", 4)),
        ),
        own(
            "converter",
            modulator.converter.map_or("ideal".to_owned(), |converter| {
                format!(
                    "{} bits at {}",
                    converter.bits,
                    quantity(converter.rate_hz, "Hz", 4)
                )
            }),
        ),
        own(
            "ripple",
            modulator.ripple.map_or("none".to_owned(), |ripple| {
                format!(
                    "{} peak at {}",
                    quantity(ripple.amplitude_v, "V", 4),
                    quantity(ripple.frequency_hz, "Hz", 4)
                )
            }),
        ),
        own("modulator's power", modulator_power(modulator)),
        own(
            "modulator's output resistance",
            quantity(modulator.output_ohm, "ohm", 4),
        ),
        own("phase path's dead time", quantity(path.delay_s, "s", 4)),
        own(
            "phase path's bandwidth",
            band(path.bandwidth_hz, path.order),
        ),
    ]
}

/// How the modulator turns power.
fn modulator_power(modulator: &Modulator) -> String {
    let percent = 100.0 * modulator.efficiency;
    let idle = quantity(modulator.idle_w, "W", 3);
    match modulator.power {
        PowerModel::Switching => format!("switching, {percent:.1} %, {idle} idle"),
        PowerModel::Linear { input_v } => {
            format!("linear from {}, {idle} idle", quantity(input_v, "V", 4))
        }
        PowerModel::SplitBand {
            input_v,
            crossover_hz,
        } => format!(
            "switching below {}, {percent:.1} %; linear above from {}; {idle} idle",
            quantity(crossover_hz, "Hz", 4),
            quantity(input_v, "V", 4)
        ),
    }
}

/// A law of widths in words.
fn law(law: WidthLaw) -> String {
    match law {
        WidthLaw::Inverse => "inverse of the map, amplitude and phase",
        WidthLaw::Amplitude => "inverse of the map, amplitude alone",
        WidthLaw::Sine => "sine law of rectangular pulses",
    }
    .to_owned()
}

/// Settings of the schemes beside `supply`.
fn settings(scheme: &Scheme) -> Vec<(String, String)> {
    let own = |name: &str, value: String| (name.to_owned(), value);
    let mut rows = vec![own("kind", scheme.name().to_owned())];
    let band = |bandwidth_hz: Option<f64>, order: u32| {
        bandwidth_hz.map_or("ideal".to_owned(), |hz| {
            format!("{}, Butterworth of order {order}", quantity(hz, "Hz", 4))
        })
    };
    match scheme {
        Scheme::Supply(_) => {}
        Scheme::Width(width) => rows.extend([
            own("law", law(width.law)),
            own(
                "grid of the edges",
                width
                    .grid_s
                    .map_or("none".to_owned(), |grid_s| quantity(grid_s, "s", 4)),
            ),
            own("shortest pulse", quantity(width.shortest_s, "s", 4)),
            own(
                "jitter of each edge",
                format!(
                    "{} RMS, seed {}",
                    quantity(width.jitter_s, "s", 4),
                    width.seed
                ),
            ),
            own("width's dead time", quantity(width.delay_s, "s", 4)),
            own(
                "phase path's dead time",
                quantity(width.phase_path.delay_s, "s", 4),
            ),
            own(
                "phase path's bandwidth",
                band(width.phase_path.bandwidth_hz, width.phase_path.order),
            ),
        ]),
        Scheme::Levels(levels) => rows.extend([
            own(
                "rails",
                match &levels.rails {
                    Rails::Parts(parts) => {
                        let parts: Vec<_> = parts.iter().map(|rail| format!("{rail:.4}")).collect();
                        format!("{} of the full supply", parts.join(", "))
                    }
                    Rails::Volts(volts) => {
                        let volts: Vec<_> =
                            volts.iter().map(|volt| quantity(*volt, "V", 4)).collect();
                        volts.join(", ")
                    }
                },
            ),
            own("law", law(levels.law)),
            own("hysteresis", format!("{} of a rail", levels.hysteresis)),
            own("settling to 1 %", quantity(levels.settling_s, "s", 4)),
            own(
                "rails' efficiency",
                format!(
                    "{:.1} %, {} idle",
                    100.0 * levels.efficiency,
                    quantity(levels.idle_w, "W", 3)
                ),
            ),
        ]),
        Scheme::Burst(burst) => rows.extend(burst_rows(burst)),
        Scheme::Outphase(branches) => rows.extend([
            own("combining", combining(&branches.combining)),
            own(
                "second branch weaker by",
                format!("{} dB", branches.gain_mismatch_db),
            ),
            own(
                "second branch turned by",
                format!("{:.3} deg", branches.phase_mismatch_rad.to_degrees()),
            ),
            own(
                "second branch later by",
                quantity(branches.delay_mismatch_s, "s", 4),
            ),
            own(
                "branches' bandwidth",
                band(branches.bandwidth_hz, branches.order),
            ),
        ]),
        Scheme::ClassB(_) => rows.push(own(
            "law",
            "efficiency pi/4 times output amplitude over full amplitude".to_owned(),
        )),
    }
    rows
}

fn combining(combining: &Combining) -> String {
    let Combining::Joined(joined) = combining else {
        return "isolated: the difference is burnt".to_owned();
    };
    let joint = &joined.joint;
    let mut text = match joint.kind {
        JointKind::Floating => "joined: the load floats between the branches".to_owned(),
        JointKind::Tee => "joined: the load stands at a tee".to_owned(),
    };
    if let Some(compensation) = joint.compensation {
        text.push_str(&format!(
            ", compensated by {} (capacitor first, inductor second)",
            quantity(compensation.reactance_ohm, "ohm", 4)
        ));
    }
    text.push_str(match joined.law {
        AngleLaw::Inverse => "; angle and phase by the inverse map",
        AngleLaw::Amplitude => "; angle by the inverse map",
        AngleLaw::Cosine => "; angle by the cosine",
    });
    text
}

fn burst_rows(burst: &BurstScheme) -> Vec<(String, String)> {
    let own = |name: &str, value: String| (name.to_owned(), value);
    let rate = quantity(burst.rate_hz, "Hz", 4);
    let edges = match burst.edges {
        MovedEdges::One => "the second edge moves",
        MovedEdges::Two => "both edges move",
    };
    let updates = match burst.updates {
        Updates::Once => "once a period",
        Updates::Twice => "twice a period",
    };
    let made = match (burst.sampling, &burst.pulses) {
        (Sampling::Natural, _) => format!("natural sampling at {rate}, {edges}"),
        (Sampling::Uniform, _) => format!("uniform sampling at {rate} {updates}, {edges}"),
        (Sampling::Shaped, _) => {
            format!("noise shaping of order {} at {rate}", burst.order)
        }
        (Sampling::File, Some(pulses)) => format!(
            "from {}, {} edges, from {} on",
            pulses.file,
            pulses.sequence.edges.len(),
            quantity(pulses.start_s, "s", 4)
        ),
        (Sampling::File, None) => "from a file".to_owned(),
    };
    let mut rows = vec![own("pulses", made)];
    if burst.sampling != Sampling::File {
        rows.extend([
            own("levels of the gate", burst.levels.to_string()),
            own(
                "shortest time between edges",
                quantity(burst.shortest_s, "s", 4),
            ),
            own("gate's dead time", quantity(burst.delay_s, "s", 4)),
        ]);
    }
    rows.push(own(
        "grid of the edges",
        burst
            .grid_s
            .map_or("none".to_owned(), |grid_s| quantity(grid_s, "s", 4)),
    ));
    rows.push(own(
        "rise and fall",
        burst
            .transitions_s
            .map_or("the stage's own".to_owned(), |(rise_s, fall_s)| {
                format!(
                    "time constants {} and {}",
                    quantity(rise_s, "s", 4),
                    quantity(fall_s, "s", 4)
                )
            }),
    ));
    rows.push(own(
        "filter behind the stage",
        burst.filter.map_or("none".to_owned(), |filter| {
            let shape = match filter.shape {
                BandShape::Butterworth => "Butterworth".to_owned(),
                BandShape::Chebyshev { ripple_db } => {
                    format!("Chebyshev with {ripple_db} dB of ripple")
                }
            };
            let rest = match filter.stop_band {
                StopBand::Absorbed => "what does not pass is burnt",
                StopBand::Reflected => "what does not pass returns and is not drawn",
            };
            format!(
                "{shape}, order {}, {} wide, {} dB lost; {rest}",
                filter.order,
                quantity(filter.bandwidth_hz, "Hz", 4),
                filter.loss_db
            )
        }),
    ));
    rows.push(own(
        "phase path's dead time",
        quantity(burst.phase_path.delay_s, "s", 4),
    ));
    rows
}
