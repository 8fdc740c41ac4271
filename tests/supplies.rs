//! Supply modulators and rails in the whole chain, against closed forms and against a naive twin in the time domain.
//!
//! Files live in memory: what is read is what a user would write.

use std::collections::HashMap;
use std::f64::consts::{FRAC_1_SQRT_2, PI, TAU};
use std::io::{self, Cursor};

use num_complex::Complex64;
use quietedge::input::{Files, ReadSeek};
use quietedge::map::{Control, Sweep};
use quietedge::orbit::{Drive, Network};
use quietedge::signal::{self, Ends, Kind, Phases, Recipe, Samples, Tones, Writing, make, write};
use quietedge::stage::Stage;
use quietedge::study::{CheckResult, Study, check};

#[derive(Debug, Default, Clone)]
struct Memory(HashMap<String, Vec<u8>>);

impl Memory {
    fn with(mut self, name: &str, bytes: impl Into<Vec<u8>>) -> Self {
        self.0.insert(name.to_owned(), bytes.into());
        self
    }
}

impl Files for Memory {
    fn open(&self, name: &str) -> io::Result<Box<dyn ReadSeek>> {
        let bytes = self.0.get(name).cloned();
        let bytes = bytes.ok_or_else(|| io::Error::new(io::ErrorKind::NotFound, "no such file"))?;
        Ok(Box::new(Cursor::new(bytes)))
    }
}

const RATE_HZ: f64 = 1e6;
const SAMPLES: usize = 1 << 14;

fn tones(count: usize, spacing_hz: f64) -> Samples {
    let kind = Kind::Tones(Tones {
        rate_hz: RATE_HZ,
        samples: SAMPLES,
        count,
        spacing_hz,
        phases: Phases::Equal,
        ends: Ends::Open,
    });
    make(&Recipe::new(kind), 5).unwrap()
}

/// `hardware` is a line of the study, `rest` what follows the signal's file.
fn carried_out(files: Memory, hardware: &str, samples: &Samples, rest: &str) -> CheckResult {
    let mut bytes = Cursor::new(Vec::new());
    write(
        &mut samples.clone(),
        Writing::WavFloat,
        &mut bytes,
        "signal.wav",
    )
    .unwrap();
    let study = format!("{hardware}\n[signal]\nfile = \"signal.wav\"\n{rest}");
    let files = files
        .with("signal.wav", bytes.into_inner())
        .with("study.toml", study);
    let study = Study::read("study.toml", &files).unwrap_or_else(|problem| panic!("{problem}"));
    let mut source = signal::open(&files, &study.signal.file, &study.signal.options).unwrap();
    check(&study, &mut *source, &mut |_| {}).unwrap_or_else(|error| panic!("{error}"))
}

/// 10 V and 0.2 A of supply, 50 ohm at every voltage, make 10 V over 50 ohm: 1 W of 2 W.
const STRAIGHT: &str = "# control = supply
# frequency = 100 MHz
# load_resistance = 50 ohm
control,output_re_v,output_im_v,supply_a
0,0,0,0
10,8,6,0.2
";

fn straight(samples: &Samples, level: f64, modulator: &str) -> CheckResult {
    carried_out(
        Memory::default().with("straight.csv", STRAIGHT),
        "map = \"straight.csv\"",
        samples,
        &format!(
            "level = {level}\n[scheme]\nkind = \"supply\"\nmodulator = {{ {modulator} }}\n[metrics]\nresolution = 2000\n"
        ),
    )
}

fn watt(result: &CheckResult) -> f64 {
    10f64.powf((result.metrics.power_dbm - 30.0) / 10.0)
}

#[test]
fn an_output_resistance_divides_the_supply_and_burns_its_part() {
    let samples = tones(2, RATE_HZ / 64.0);
    let plain = straight(&samples, 1.0, "efficiency = 0.9");
    let sagging = straight(
        &samples,
        1.0,
        "efficiency = 0.9, output_resistance = \"10 ohm\"",
    );
    // The stage is 50 ohm: 5/6 of the voltage, 25/36 of the power, 5/6 of the efficiency.
    assert!((watt(&sagging) / watt(&plain) - 25.0 / 36.0).abs() < 1e-9);
    let parts = sagging.metrics.efficiency_parts;
    assert!((parts.modulator.unwrap() - 0.9 * 5.0 / 6.0).abs() < 1e-9);
    assert!((parts.stage.unwrap() - 0.5).abs() < 1e-9);
    assert!((sagging.metrics.efficiency.unwrap() - 0.5 * 0.9 * 5.0 / 6.0).abs() < 1e-9);
    // A divider bends nothing.
    assert!(
        sagging.metrics.evm_percent < 0.01,
        "{}",
        sagging.metrics.evm_percent
    );
}

#[test]
fn a_linear_regulator_draws_its_input_times_the_mean_current() {
    let linear = "power = { model = \"linear\", input = \"12 V\" }, idle = \"50 mW\"";
    let constant = straight(&tones(1, 1.0), 0.6, linear);
    // 6 V and 0.12 A: 0.36 W of 12 V times 0.12 A and 50 mW.
    let law = 0.36 / (12.0 * 0.12 + 0.05);
    let found = constant.metrics.efficiency.unwrap();
    assert!((found / law - 1.0).abs() < 1e-6, "{found} {law}");
    // Two tones: v = 10 |cos|, i = v / 50 ohm, of which the mean is 2/pi of the peak; half a watt comes out. The
    // sampled mean of |cos| over whole periods is that near 1e-4 at 500 instants a period.
    let swinging = straight(&tones(2, RATE_HZ / 64.0), 1.0, linear);
    let law = 0.5 / (12.0 * 0.2 * 2.0 / PI + 0.05);
    let found = swinging.metrics.efficiency.unwrap();
    assert!((found / law - 1.0).abs() < 1e-3, "{found} {law}");
}

#[test]
fn a_split_band_modulator_draws_what_each_part_delivers() {
    // |cos u| = 2/pi + (4/pi) sum (-1)^(n+1) cos(2nu) / (4n^2 - 1): harmonics n of the tones' spacing.
    let spacing_hz = RATE_HZ / 64.0;
    let samples = tones(2, spacing_hz);
    let split = straight(
        &samples,
        1.0,
        &format!(
            "efficiency = 0.9, power = {{ model = \"split_band\", input = \"12 V\", crossover = {} }}",
            2.0 * spacing_hz
        ),
    );
    let peak_a = 0.2;
    let steps = 20_000;
    let harmonics: Vec<(f64, f64)> = (1..400)
        .map(|n| {
            let sign = if n % 2 == 1 { 1.0 } else { -1.0 };
            let order = f64::from(n);
            (order, sign * 4.0 / PI / (4.0 * order * order - 1.0))
        })
        .collect();
    let (mut switching_w, mut linear_w) = (0.0, 0.0);
    for step in 0..steps {
        let u = PI * f64::from(step) / f64::from(steps);
        // First order: harmonic n behind 1 / (1 + j n / 2).
        let slow = 2.0 / PI
            + harmonics
                .iter()
                .map(|(order, size)| {
                    let gain = 1.0 / Complex64::new(1.0, order / 2.0);
                    size * (gain * Complex64::cis(2.0 * order * u)).re
                })
                .sum::<f64>();
        let now = u.cos().abs();
        switching_w += 10.0 * now * peak_a * slow / 0.9;
        linear_w += 12.0 * peak_a * (now - slow).max(0.0);
    }
    let law = 0.5 / ((switching_w + linear_w) / f64::from(steps));
    let found = split.metrics.efficiency.unwrap();
    println!("split band: efficiency {found:.5}, closed form {law:.5}");
    assert!((found / law - 1.0).abs() < 2e-3, "{found} {law}");
}

#[test]
fn poles_are_the_butterworth_response_where_they_stand_there() {
    let samples = tones(2, RATE_HZ / 64.0);
    let named = straight(&samples, 0.9, "bandwidth = \"60 kHz\", order = 2");
    for poles in [
        format!("poles = [{{ frequency = \"60 kHz\", q = {FRAC_1_SQRT_2} }}]"),
        format!(
            "poles = [{{ re = {0}, im = {1} }}]",
            -TAU * 60e3 * FRAC_1_SQRT_2,
            TAU * 60e3 * FRAC_1_SQRT_2
        ),
        // Far to the left, pole and zero on each other.
        format!(
            "poles = [{{ frequency = \"60 kHz\", q = {FRAC_1_SQRT_2} }}, {{ frequency = \"90 kHz\" }}], zeros = [{{ frequency = \"90 kHz\" }}]"
        ),
    ] {
        let given = straight(&samples, 0.9, &poles);
        let (a, b) = (named.metrics.evm_percent, given.metrics.evm_percent);
        // The pole under its zero is two sections in place of one: straight lines between samples once more.
        assert!(a > 1.0 && (a / b - 1.0).abs() < 1e-3, "{poles}: {a} {b}");
    }
}

const STAGE: &str = include_str!("../signals/tide-gauge.stage.toml");

fn on_stage(stage: &str, samples: &Samples, level: f64, scheme: &str) -> CheckResult {
    carried_out(
        Memory::default().with("stage.toml", stage),
        "stage = \"stage.toml\"",
        samples,
        &format!(
            "level = {level}\n[scheme]\nkind = \"levels\"\n{scheme}\n[metrics]\nresolution = 2000\n"
        ),
    )
}

#[test]
fn a_resting_signal_sits_on_its_rail_at_the_width_that_is_left() {
    let result = on_stage(
        STAGE,
        &tones(1, 1.0),
        0.3,
        "rails = [0.5, 1.0]\nefficiency = 0.95\nidle = \"20 mW\"",
    );
    let stage = Stage::parse("stage", STAGE).unwrap();
    let network = Network::new(&stage).unwrap();
    let map = Sweep::full(&network, Control::Width, 201)
        .unwrap()
        .solve(&network)
        .unwrap();
    // 0.3 of full output on half the supply is 0.6 of its own.
    let width = map.inverse(0.6 * map.full_amplitude_v()).unwrap();
    let orbit = network
        .orbit(0.5 * stage.supply_v, &Drive::new(&stage.driver, width))
        .unwrap();
    assert!((watt(&result) / orbit.output_w - 1.0).abs() < 1e-4);
    let law = orbit.output_w / (orbit.supply_w / 0.95 + 0.02);
    let found = result.metrics.efficiency.unwrap();
    assert!((found / law - 1.0).abs() < 1e-4, "{found} {law}");
}

#[test]
fn volts_and_parts_of_the_supply_are_the_same_rails() {
    let samples = tones(2, RATE_HZ / 64.0);
    let by = |rails: &str| {
        let result = on_stage(
            STAGE,
            &samples,
            0.9,
            &format!("{rails}\nsettling = \"1 us\""),
        );
        serde_json::to_value(&result.metrics).unwrap()
    };
    let parts = by("rails = [0.25, 0.5, 1.0]");
    assert_eq!(parts, by("rail_voltages = [\"1.5 V\", \"3 V\", \"6 V\"]"));
    assert_ne!(parts, by("count = 3"));
}

/// Complex lines of one period of the output over `full`, orders 1, 3, 5, ... in half spacings, by brute force:
/// a million steps a period, the rail decided at each, the supply settled exactly from step to step.
fn naive_lines(
    rails: &[f64],
    hysteresis: f64,
    settling_periods: f64,
    level: f64,
    orders: &[i32],
) -> Vec<Complex64> {
    let steps = 1 << 19;
    let left = if settling_periods > 0.0 {
        (-100f64.ln() / (settling_periods * f64::from(steps))).exp()
    } else {
        0.0
    };
    let (mut rail, mut supply) = (rails.len() - 1, 1.0);
    let mut lines = vec![Complex64::ZERO; orders.len()];
    // cos u over two turns of the envelope; the first round settles.
    for step in 0..2 * steps {
        let u = TAU * (f64::from(step % steps) + 0.5) / f64::from(steps);
        let m = level * u.cos().abs();
        while rail + 1 < rails.len() && m > rails[rail] {
            rail += 1;
        }
        while rail > 0 && m < rails[rail - 1] * (1.0 - hysteresis) {
            rail -= 1;
        }
        supply = rails[rail] + (supply - rails[rail]) * left;
        if step >= steps {
            // An ideal width makes m / rail of it.
            let output = u.cos().signum() * m / rails[rail] * supply;
            for (line, order) in lines.iter_mut().zip(orders) {
                *line += output * Complex64::cis(-f64::from(*order) * u) / f64::from(steps);
            }
        }
    }
    lines
}

#[test]
fn rails_that_settle_leave_the_lines_of_a_naive_twin() {
    // Rectangular pulses: the width is asin(m sin(pi d)) / pi, and its map is that sine.
    let mut map = String::from(
        "# control = width\n# frequency = 100 MHz\n# load_resistance = 50 ohm\n# supply = 10 V\ncontrol,amplitude_v,supply_a\n",
    );
    for at in 0..=1000 {
        let width = 0.5 * f64::from(at) / 1000.0;
        map.push_str(&format!("{width},{},0.1\n", 10.0 * (PI * width).sin()));
    }
    let spacing_hz = RATE_HZ / 64.0;
    let samples = tones(2, spacing_hz);
    let orders = [1, 3, 5, 9, 15, 25];
    for (settling_s, name) in [(0.0, "at once"), (3e-6, "in 3 us"), (0.4e-6, "in 400 ns")] {
        let result = carried_out(
            Memory::default().with("map.csv", map.clone()),
            "map = \"map.csv\"",
            &samples,
            &format!(
                "level = 0.9\n[scheme]\nkind = \"levels\"\nrails = [0.3, 0.55, 1.0]\nhysteresis = 0.07\nsettling = {settling_s:e}\n[limits]\nchannel = \"40 kHz\"\nacpr = [{{ offset = \"100 kHz\", bandwidth = \"60 kHz\", limit = \"-20 dB\" }}]\n[metrics]\nresolution = 2000\n"
            ),
        );
        let moved_db = result.rate.convergence.moved_db;
        assert!(
            moved_db < 0.1 && result.rate.factor <= 32,
            "{name}: {:?}",
            result.rate
        );
        // Orders in half spacings: one period of the carrier's sign is two of the envelope.
        let twin = naive_lines(
            &[0.3, 0.55, 1.0],
            0.07,
            settling_s * spacing_hz / 2.0,
            0.9,
            &orders,
        );
        let power = |order: i32| {
            let at = f64::from(order) * 0.5 * spacing_hz;
            let half = 0.2 * spacing_hz;
            result
                .output_spectrum
                .power_w(at - half, at + half)
                .unwrap()
        };
        for (line, &order) in twin.iter().zip(&orders).skip(1) {
            let found = 10.0 * (power(order) / power(1)).log10();
            let law = 20.0 * (line.norm() / twin[0].norm()).log10();
            if settling_s == 0.0 {
                // Nothing is left but the map's own interpolation.
                assert!(found < -70.0, "{name}, order {order}: {found} dB");
                continue;
            }
            println!("rails settle {name}, order {order}: {found:.3} dB, twin {law:.3} dB");
            // Half a sample's hold weighs (pi f / rate)^2 / 6 at most, below 0.05 dB up to order 25.
            assert!(
                (found - law).abs() < 0.1,
                "{name}, order {order}: {found} {law}"
            );
        }
    }
}

/// The demo's stage with part of its drain capacitance in a junction.
fn curved() -> String {
    let stage = STAGE.replace(
        "capacitance = \"75 pF\"",
        "capacitance = \"25 pF\"\njunction = { zero_bias = \"120 pF\", potential = \"0.8 V\", grading = 0.45 }",
    );
    assert_ne!(stage, STAGE);
    stage
}

#[test]
fn a_curved_stage_has_a_width_map_for_every_rail() {
    // Amplitudes from 0.2 to 0.9: every rail is used, and no pulse is narrower than the maps know.
    let samples = Samples::new(
        RATE_HZ,
        (0..SAMPLES)
            .map(|n| Complex64::new(0.55 + 0.35 * (TAU * n as f64 / 64.0).cos(), 0.0))
            .collect(),
    );
    let scheme = "rails = [0.4, 0.7, 1.0]";
    let result = on_stage(&curved(), &samples, 0.95, scheme);
    let linear = on_stage(STAGE, &samples, 0.95, scheme);
    println!(
        "levels: EVM {:.4} % curved, {:.4} % linear",
        result.metrics.evm_percent, linear.metrics.evm_percent
    );
    // The inverse of each rail's own map: what is left is interpolation between its points.
    assert!(result.metrics.evm_percent < 0.1 && linear.metrics.evm_percent < 0.1);
    // Scaled from full supply, as if it were linear, the same scheme would be off by far more.
    let stage = Stage::parse("stage", &curved()).unwrap();
    let network = Network::new(&stage).unwrap();
    let drive = Drive::new(&stage.driver, stage.driver.duty);
    let full = network.orbit(stage.supply_v, &drive).unwrap().output_v;
    let low = network
        .orbit(0.4 * stage.supply_v, &drive)
        .unwrap()
        .output_v;
    assert!(
        (low / (0.4 * full) - 1.0).norm() > 0.02,
        "the stage is not curved enough"
    );
    // While a rail settles, supplies between are solved too.
    let settling = on_stage(
        &curved(),
        &samples,
        0.95,
        "rails = [0.4, 0.7, 1.0]\nsettling = \"1 us\"",
    );
    assert!(settling.metrics.evm_percent > result.metrics.evm_percent);
}

fn warned(result: &CheckResult, part: &str) -> bool {
    let warnings = result.warnings.iter();
    warnings
        .map(ToString::to_string)
        .any(|warning| warning.contains(part))
}

#[test]
fn each_scheme_says_where_its_model_ends() {
    let samples = tones(2, RATE_HZ / 64.0);
    let supply = |ripple_hz: f64| {
        carried_out(
            Memory::default().with("stage.toml", STAGE),
            "stage = \"stage.toml\"",
            &samples,
            &format!(
                "level = 0.9\n[scheme]\nkind = \"supply\"\nmodulator = {{ ripple = {{ amplitude = \"3 mV\", frequency = {ripple_hz} }} }}\n[metrics]\nresolution = 2000\n"
            ),
        )
    };
    let settling_s = supply(1e5).stage.unwrap().settling_s;
    // A tenth of a radian while the stage settles.
    let limit_hz = 0.1 / (TAU * settling_s);
    let ripple = "too slowly to follow a ripple";
    assert!(warned(&supply(1.1 * limit_hz), ripple) && !warned(&supply(0.9 * limit_hz), ripple));

    let levels = |settling: f64| {
        on_stage(
            STAGE,
            &samples,
            0.9,
            &format!("count = 2\nsettling = {settling:e}"),
        )
    };
    let rails = "a rail settles in";
    assert!(warned(&levels(0.0), rails) && warned(&levels(9.0 * settling_s), rails));
    assert!(!warned(&levels(11.0 * settling_s), rails));
    // Two tones go through zero, a width map does not.
    assert!(warned(&levels(0.0), "the narrowest pulse of the map"));
    let shallow = on_stage(STAGE, &tones(1, 1.0), 0.9, "count = 2");
    assert!(!warned(&shallow, "the narrowest pulse of the map"));

    let outphase = |gain: f64| {
        carried_out(
            Memory::default().with("stage.toml", STAGE),
            "stage = \"stage.toml\"",
            &samples,
            &format!(
                "level = 0.9\n[scheme]\nkind = \"outphase\"\ncombining = \"isolated\"\nmismatch = {{ gain = \"{gain} dB\" }}\n[metrics]\nresolution = 2000\n"
            ),
        )
    };
    let unequal = "the weaker one is taken to draw as much";
    assert!(warned(&outphase(0.6), unequal) && !warned(&outphase(0.4), unequal));
    println!("the demo's stage settles in {settling_s:e} s");
    let slow = "the branches move within about";
    assert_eq!(
        warned(&outphase(0.0), slow),
        settling_s > 0.0025 / RATE_HZ && settling_s <= 0.01 / RATE_HZ
    );

    // A carrier of 2 MHz with a signal sampled at 8 MHz.
    let low = carried_out(
        Memory::default().with("straight.csv", STRAIGHT.replace("100 MHz", "2 MHz")),
        "map = \"straight.csv\"",
        &samples,
        "level = 0.9\n[scheme]\nkind = \"supply\"\n[metrics]\nresolution = 2000\n",
    );
    assert!(warned(&low, "no model past half of the carrier"));
}
