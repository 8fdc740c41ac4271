//! Invented data in the shapes the report shows.

use quietedge::report::figures::*;
use quietedge::report::page::*;
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;
use std::f64::consts::TAU;

/// One period with a half-sine-like drain voltage.
pub fn waveform() -> WaveformFigure {
    let period = 1.0 / 169.4e6;
    let count = 600;
    let mut figure = WaveformFigure {
        title: "Tide gauge, 169 MHz: one period at 6 V".to_owned(),
        closed_s: vec![(0.0, period * 0.25), (period * 0.75, period)],
        ..Default::default()
    };
    for index in 0..=count {
        let share = index as f64 / count as f64;
        let open = (share - 0.25).clamp(0.0, 0.5) / 0.5;
        figure.time_s.push(share * period);
        figure
            .drain_v
            .push(21.3 * (open * std::f64::consts::PI).sin().powf(1.3) * (1.0 - 0.3 * open) * 1.19);
        let closed = !(0.25..0.75).contains(&share);
        let phase = (share + 0.25).fract();
        figure.switch_a.push(if closed {
            2.4 * (phase / 0.5 * 2.2).sin().max(0.0)
        } else {
            0.0
        });
        figure.load_v.push(22.4 * (TAU * share + 0.4).cos());
    }
    figure
}

/// A shaped channel with regrowth, and a mask that it breaks on the upper side.
pub fn spectrum() -> SpectrumFigure {
    let mut random = ChaCha8Rng::seed_from_u64(7);
    let mut curve = |name: &str, shoulder: f64| SpectrumCurve {
        name: name.to_owned(),
        points: (-8192..8192)
            .map(|bin| {
                let offset = f64::from(bin) * 48_000.0 / 16_384.0;
                let edge = (offset.abs() / 4_200.0).powi(8);
                let core = 18.0 - 10.0 * (1.0 + edge).log10() * 2.0;
                let regrowth =
                    shoulder - offset.abs() / 1_100.0 - 2.0 * (offset < 0.0) as u8 as f64;
                let level =
                    10.0 * (10f64.powf(core / 10.0) + 10f64.powf(regrowth / 10.0) + 1e-8).log10();
                (offset, level + random.random_range(-1.5..1.5))
            })
            .collect(),
    };
    let side = |sign: f64| MaskLine {
        name: "mask D".to_owned(),
        points: [
            (0.0, 37.0),
            (5_625.0, 37.0),
            (5_625.0, 17.0),
            (12_500.0, -33.0),
            (12_500.0, -40.0),
            (24_000.0, -40.0),
        ]
        .map(|(offset, level)| (sign * offset, level))
        .to_vec(),
    };
    SpectrumFigure {
        title: "Output spectrum".to_owned(),
        level_unit: "dBm".to_owned(),
        resolution_hz: 100.0,
        curves: vec![curve("output", -14.0), curve("wanted", -62.0)],
        masks: vec![side(1.0), side(-1.0)],
        worst: vec![WorstPoint {
            offset_hz: 12_500.0,
            level: -24.6,
            margin_db: -9.4,
        }],
        span_hz: None,
    }
}

pub fn bend() -> BendFigure {
    let control: Vec<f64> = (0..=200).map(|index| 0.03 * f64::from(index)).collect();
    let curve = |name: &str, bend: f64| BendCurve {
        name: name.to_owned(),
        amplitude_v: control
            .iter()
            .map(|v| 3.7 * v / (1.0 + bend * v / 60.0) + 0.4 * (-v / 0.3).exp())
            .collect(),
        phase_deg: control
            .iter()
            .map(|v| -24.0 + 60.0 * (-v / 0.35).exp() - bend * 1.7 * v)
            .collect(),
        control: control.clone(),
    };
    BendFigure {
        title: "What the stage makes of the signal".to_owned(),
        control: Quantity::new("supply", "V"),
        curves: vec![curve("stage", 1.0), curve("with table", 0.05)],
        density: control
            .iter()
            .map(|v| (*v, v * (-(v - 3.0) * (v - 3.0) / 3.0).exp()))
            .collect(),
        floor: Some(0.3),
    }
}

pub fn envelope() -> EnvelopeFigure {
    let time: Vec<f64> = (0..900)
        .map(|index| f64::from(index) * 0.5e-6 + 31.2e-3)
        .collect();
    let curve = |name: &str, delay: f64, floor: f64| EnvelopeCurve {
        name: name.to_owned(),
        value: time
            .iter()
            .map(|t| {
                let x = (t - 31.2e-3 - 225e-6 - delay) / 40e-6;
                (5.2 * x.abs().tanh() * (1.0 - 0.2 * (x * 0.7).cos())).max(floor)
            })
            .collect(),
        time_s: time.clone(),
    };
    EnvelopeFigure {
        title: "Envelope and supply around the deepest notch".to_owned(),
        quantity: Quantity::new("supply", "V"),
        curves: vec![
            curve("wanted envelope", 0.0, 0.0),
            curve("supply", 9e-6, 0.3),
            curve("output envelope", 10e-6, 0.45),
        ],
    }
}

pub fn ccdf() -> CcdfFigure {
    let curve = |name: &str, reach: f64| CcdfCurve {
        name: name.to_owned(),
        points: (0..140)
            .map(|index| f64::from(index) * 0.1 - 3.0)
            .map(|db| (db, ((reach - db) / (reach + 3.0)).max(0.0).powf(2.5)))
            .collect(),
    };
    CcdfFigure {
        title: "How often the power is above its mean".to_owned(),
        curves: vec![curve("signal", 7.4), curve("output", 6.6)],
    }
}

pub fn map() -> MapFigure {
    let control: Vec<f64> = (0..=100).map(|index| 0.06 * f64::from(index)).collect();
    MapFigure {
        title: "Tide gauge, 169 MHz: map over the supply".to_owned(),
        control: Quantity::new("supply", "V"),
        amplitude_v: control.iter().map(|v| 3.7 * v + 0.2).collect(),
        phase_deg: control
            .iter()
            .map(|v| -24.0 + 50.0 * (-v / 0.3).exp())
            .collect(),
        efficiency: control.iter().map(|v| 0.87 * v / (v + 0.2)).collect(),
        switch_peak_v: control.iter().map(|v| 3.6 * v + 0.7).collect(),
        control_values: control,
    }
}

pub fn mask() -> MaskFigure {
    MaskFigure {
        title: "Mask D, channel 12.5 kHz".to_owned(),
        level_axis: "dB relative to the unmodulated carrier, in 100 Hz".to_owned(),
        lines: spectrum().masks,
    }
}

pub fn cloud() -> CloudFigure {
    let mut random = ChaCha8Rng::seed_from_u64(3);
    CloudFigure {
        title: "Output amplitude over wanted amplitude".to_owned(),
        across: "wanted amplitude, V".to_owned(),
        up: "output amplitude, V".to_owned(),
        samples: (0..40_000)
            .map(|_| {
                let x: f64 = random.random::<f64>().max(random.random()) * 22.0;
                (
                    x,
                    x / (1.0 + x / 120.0)
                        + (random.random::<f64>() - 0.5) * (0.4 + 2.0 / (1.0 + x)),
                )
            })
            .collect(),
        line: (0..=40)
            .map(|x| f64::from(x) * 0.55)
            .map(|x| (x, x / (1.0 + x / 120.0)))
            .collect(),
        line_name: "static map".to_owned(),
    }
}

/// All figures, by file name.
pub fn figures() -> Vec<(&'static str, quietedge::report::Figure, &'static str)> {
    vec![
        (
            "spectrum",
            spectrum().figure(),
            "The output breaks the mask above +12 kHz; the wanted signal alone would keep it by 20 dB. The supply modulator is 300 ns late.",
        ),
        (
            "bend",
            bend().figure(),
            "Amplitude is straight above 0.5 V; phase runs away near zero supply, where the signal spends 2 % of its time.",
        ),
        (
            "envelope",
            envelope().figure(),
            "The supply cannot follow the notch and arrives late.",
        ),
        (
            "ccdf",
            ccdf().figure(),
            "The signal peaks 7.4 dB above its mean.",
        ),
        (
            "waveform",
            waveform().figure(),
            "At full supply the drain reaches 21.3 V.",
        ),
        (
            "map",
            map().figure(),
            "Without capacitance curvature the amplitude is a straight line.",
        ),
        ("mask", mask().figure(), "From the text of the rule."),
        (
            "cloud",
            cloud().figure(),
            "Spread at small amplitudes shows memory.",
        ),
    ]
}

pub fn page() -> Page {
    let row = |name: &str, outcome, found: &str, allowed: &str, margin_db, reason: &str| CheckRow {
        name: name.to_owned(),
        outcome,
        found: found.to_owned(),
        allowed: allowed.to_owned(),
        margin_db,
        reason: reason.to_owned(),
    };
    let key = |name: &str, value: &str, note: &str| KeyFigure {
        name: name.to_owned(),
        value: value.to_owned(),
        note: note.to_owned(),
    };
    let facts = |title: &str, rows: &[(&str, &str)]| FactGroup {
        title: title.to_owned(),
        rows: rows
            .iter()
            .map(|(a, b)| ((*a).to_owned(), (*b).to_owned()))
            .collect(),
    };
    Page {
        title: "Tide gauge, supply modulated".to_owned(),
        subtitle: "Stage tide-gauge.stage.toml at 169.4 MHz, signal tide-gauge.wav, scheme supply".to_owned(),
        headline: Some(Headline {
            outcome: Outcome::Outside,
            reason: "mask D is broken on the upper side at +12.5 kHz: -24.6 dBm in 100 Hz where -34 dBm is allowed".to_owned(),
            margin_db: Some(-9.4),
        }),
        checks: vec![
            row("mask D, upper side, 5.6 to 12.5 kHz", Outcome::Outside, "-24.6 dBm", "-34.0 dBm", Some(-9.4), "worst at +12.5 kHz"),
            row("mask D, lower side, 5.6 to 12.5 kHz", Outcome::Within, "-35.1 dBm", "-33.0 dBm", Some(2.1), "worst at -12.4 kHz"),
            row("EVM", Outcome::Within, "3.4 %", "10 %", Some(9.4), ""),
            row("adjacent channel", Outcome::Undecided, "", "-60 dB", None, "the signal's rate of 48 kHz does not reach the adjacent channel at 25 kHz"),
            row("peak switch voltage", Outcome::Within, "21.3 V", "40 V", Some(5.5), ""),
        ],
        warnings: vec!["Doubling the oversampling moved the smallest margin by 0.2 dB: set oversampling = 64 or more.".to_owned()],
        key_figures: vec![
            key("output power", "36.8 dBm", "average over the signal"),
            key("efficiency", "71.3 %", "modulator and driver included"),
            key("smallest margin", "-9.4 dB", "mask D, upper side"),
            key("EVM", "3.4 %", "after gain and delay alignment"),
            key("PAPR", "7.4 dB", ""),
            key("occupied bandwidth", "8.61 kHz", "99 %"),
        ],
        figures: figures().into_iter().map(|(_, figure, caption)| CaptionedFigure { figure, caption: caption.to_owned() }).collect(),
        facts: vec![
            facts("Stage", &[("frequency", "169.4 MHz"), ("feed", "8.2 nH, 50 mohm"), ("drain capacitance", "60 pF"), ("energy residual", "2.1e-14")]),
            facts("Map", &[("points", "201"), ("control", "0 V to 6 V"), ("largest phase step", "0.4 deg")]),
            facts("Scheme", &[("modulator bandwidth", "60 kHz, order 2"), ("modulator delay", "300 ns"), ("oversampling", "32")]),
        ],
        model_limits: vec!["The chain goes through the static map: memory in the load network is not modelled.".to_owned()],
        conditions: Conditions {
            command: "quietedge check signals/tide-gauge.study.toml --out report".to_owned(),
            version: "0.1.0".to_owned(),
            seed: Some(7),
            inputs: vec![("tide-gauge.study.toml".to_owned(), "title = \"Tide gauge, supply modulated\"\nstage = \"tide-gauge.stage.toml\"\n\n[signal]\nfile = \"tide-gauge.wav\"\nlevel = 0.95\n\n[scheme]\nkind = \"supply\"\nfloor = 0.05                         # keeps the stage out of its deepest notches\nmodulator = { bandwidth = \"60 kHz\", order = 2, delay = \"300 ns\" }\n".to_owned())],
        },
    }
}
