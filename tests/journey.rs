//! The whole chain, from study and signal to metrics and verdict, against closed forms.
//!
//! Files live in memory: what is read is what a user would write.

use std::collections::HashMap;
use std::f64::consts::{PI, TAU};
use std::io::{self, Cursor};

use num_complex::Complex64;
use quietedge::input::{Files, ReadSeek};
use quietedge::map::{Control, Sweep};
use quietedge::metrics::Spectrum;
use quietedge::orbit::{Drive, Network};
use quietedge::report::documents::{check_document, map_csv};
use quietedge::signal::{
    self, Ends, Kind, Noise, Phases, Recipe, Samples, Tones, Writing, make, write,
};
use quietedge::stage::Stage;
use quietedge::study::{CheckResult, Metrics, Study, check};
use quietedge::verdict::Outcome;

/// Files by name.
#[derive(Debug, Default, Clone)]
struct Memory(HashMap<String, Vec<u8>>);

impl Memory {
    fn with(mut self, name: &str, bytes: impl Into<Vec<u8>>) -> Self {
        self.0.insert(name.to_owned(), bytes.into());
        self
    }

    fn with_signal(self, samples: &Samples) -> Self {
        let mut bytes = Cursor::new(Vec::new());
        write(
            &mut samples.clone(),
            Writing::WavFloat,
            &mut bytes,
            "signal.wav",
        )
        .unwrap_or_else(|error| panic!("{error}"));
        self.with("signal.wav", bytes.into_inner())
    }
}

impl Files for Memory {
    fn open(&self, name: &str) -> io::Result<Box<dyn ReadSeek>> {
        let bytes = self.0.get(name).cloned();
        let bytes = bytes.ok_or_else(|| io::Error::new(io::ErrorKind::NotFound, "no such file"))?;
        Ok(Box::new(Cursor::new(bytes)))
    }
}

/// `study.toml` of `files` carried out.
fn carried_out(files: &Memory) -> CheckResult {
    let study = Study::read("study.toml", files).unwrap_or_else(|problem| panic!("{problem}"));
    let source = signal::open(files, &study.signal.file, &study.signal.options);
    let mut source = source.unwrap_or_else(|error| panic!("{error}"));
    check(&study, &mut *source, &mut |_| {}).unwrap_or_else(|error| panic!("{error}"))
}

/// A straight map: 10 V and 0.2 A from the supply give a peak of 10 V over 50 ohm, 1 W of 2 W.
const STRAIGHT: &str = "# control = supply
# frequency = 100 MHz
# load_resistance = 50 ohm
control,output_re_v,output_im_v,supply_a
0,0,0,0
10,8,6,0.2
";

fn straight(study: &str, samples: &Samples) -> CheckResult {
    let files = Memory::default()
        .with("straight.csv", STRAIGHT)
        .with(
            "study.toml",
            format!("map = \"straight.csv\"\n[signal]\nfile = \"signal.wav\"\n{study}"),
        )
        .with_signal(samples);
    carried_out(&files)
}

fn made(kind: Kind) -> Samples {
    make(&Recipe::new(kind), 5).unwrap_or_else(|error| panic!("{error}"))
}

/// Two tones that close on themselves: the spacing is `turns` in all samples, odd so that every crossing of the
/// carrier lies elsewhere between samples.
fn two_tones(turns: usize) -> (Samples, f64) {
    let (rate_hz, samples) = (1_000_000.0, 1 << 15);
    let spacing_hz = rate_hz * turns as f64 / samples as f64;
    let tones = Tones {
        rate_hz,
        samples,
        count: 2,
        spacing_hz,
        phases: Phases::Equal,
        // The spacing closes, the tones themselves at half of it do not: nothing here depends on it.
        ends: Ends::Open,
    };
    (made(Kind::Tones(tones)), spacing_hz)
}

fn carrier() -> Samples {
    made(Kind::Tones(Tones {
        rate_hz: 1_000_000.0,
        samples: 1 << 15,
        count: 1,
        spacing_hz: 1.0,
        phases: Phases::Equal,
        ends: Ends::Open,
    }))
}

fn noise(samples: usize, bandwidth_hz: f64) -> Samples {
    made(Kind::Noise(Noise {
        rate_hz: 1_000_000.0,
        samples,
        bandwidth_hz,
        ends: Ends::Periodic,
    }))
}

/// Power of the line at `offset_hz`, dB over that of the line at `reference_hz`; both sides of each.
fn line_db(spectrum: &Spectrum, offset_hz: f64, reference_hz: f64, half_hz: f64) -> f64 {
    let power = |hz: f64| {
        [-hz, hz]
            .iter()
            .map(|hz| spectrum.power_w(hz - half_hz, hz + half_hz))
            .sum::<Result<f64, _>>()
            .unwrap_or_else(|error| panic!("{error}"))
    };
    10.0 * (power(offset_hz) / power(reference_hz)).log10()
}

/// Two tones of amplitude 1/2 at +/-B/2: the envelope is `|cos u|`, u = pi B t, the phase turns over at its zeros.
/// With the envelope late by a = pi B tau the output is `|cos(u - a)| sgn(cos u)`, which differs from the delayed
/// signal by -2 cos(u - a) for u from pi/2 to pi/2 + a, and with the other sign half a turn later. For small a
/// these are pulses of area a^2/(pi B) that alternate at the rate B: lines of pi (B tau)^2 at odd multiples of B/2,
/// **2 pi (B tau)^2 of each tone** (F. H. Raab, IEEE Trans. Microw. Theory Tech., Dec. 1996). Exactly:
///
/// ```text
/// c_k = -(2/pi) integral from pi/2 to pi/2 + a of cos(u - a) exp(-jku) du,     and exp(-ja)/2 more for k = 1
/// ```
fn delayed_line(k: f64, a: f64) -> Complex64 {
    let (from, to) = (PI / 2.0, PI / 2.0 + a);
    // cos(u - a) exp(-jku) is half the sum of exp(-ja) exp(-j(k-1)u) and exp(ja) exp(-j(k+1)u).
    let integral = |order: f64| {
        if order == 0.0 {
            return Complex64::from(to - from);
        }
        (Complex64::cis(-order * from) - Complex64::cis(-order * to)) / Complex64::new(0.0, order)
    };
    let both = Complex64::cis(-a) * integral(k - 1.0) + Complex64::cis(a) * integral(k + 1.0);
    let own = if k == 1.0 {
        Complex64::cis(-a) / 2.0
    } else {
        Complex64::ZERO
    };
    own - both / PI
}

#[test]
fn a_late_envelope_makes_third_order_products() {
    let (samples, spacing_hz) = two_tones(511);
    let mut worst = (0.0f64, 0.0f64);
    for b_tau in [0.02, 0.03, 0.05, 0.07, 0.1] {
        let delay_s = b_tau / spacing_hz;
        let result = straight(
            &format!(
                "level = 1\n[scheme]\nkind = \"supply\"\nmodulator = {{ delay = {delay_s:e} }}\n[metrics]\nresolution = 2000\n"
            ),
            &samples,
        );
        let found = line_db(
            &result.output_spectrum,
            1.5 * spacing_hz,
            0.5 * spacing_hz,
            0.25 * spacing_hz,
        );
        let formula = 20.0 * (TAU * b_tau * b_tau).log10();
        let a = PI * b_tau;
        // Both sides of the carrier: orders 3 and -3 are each other's conjugates.
        let exact = 20.0 * (delayed_line(3.0, a).norm() / delayed_line(1.0, a).norm()).log10();
        println!("B tau {b_tau}: {found:.3} dB, formula {formula:.3} dB, exact {exact:.3} dB");
        worst.0 = worst.0.max((found - formula).abs());
        worst.1 = worst.1.max((found - exact).abs());
    }
    println!("worst: formula {:.3} dB, exact {:.3} dB", worst.0, worst.1);
    assert!(worst.0 < 0.3, "{worst:?}");
    // What is left is the sampling of the phase's turn.
    assert!(worst.1 < 0.1, "{worst:?}");
}

#[test]
fn ripple_makes_sidebands() {
    // (V + r cos w t) on a carrier of V: each sideband r/2 of V.
    let result = straight(
        "level = 0.6\n[scheme]\nkind = \"supply\"\nmodulator = { ripple = { amplitude = \"30 mV\", frequency = \"203.7 kHz\" } }\n",
        &carrier(),
    );
    let spectrum = &result.output_spectrum;
    let expected = 20.0 * (0.03 / 2.0 / 6.0f64).log10();
    let carrier_w = spectrum.power_w(-30e3, 30e3).expect("the carrier");
    for side in [-1.0, 1.0] {
        let at = side * 203.7e3;
        let power_w = spectrum.power_w(at - 30e3, at + 30e3).expect("a sideband");
        let found = 10.0 * (power_w / carrier_w).log10();
        println!("sideband {found:.4} dBc, closed form {expected:.4} dBc");
        assert!((found - expected).abs() < 0.1, "{found} {expected}");
    }
    // The error is the ripple itself: r/sqrt(2) of V.
    let evm = 100.0 * 0.03 / 2f64.sqrt() / 6.0;
    let found = result.metrics.evm_percent;
    println!("EVM {found:.5} %, closed form {evm:.5} %");
    assert!((found / evm - 1.0).abs() < 0.01, "{found} {evm}");
}

#[test]
fn a_converter_adds_the_noise_of_its_steps() {
    // Steps of q held for a sample: an error of variance q^2/12, white over the converter's rate, shaped by the
    // hold's sinc^2 (W. R. Bennett, "Spectra of quantized signals", Bell Syst. Tech. J., July 1948). It applies where
    // the magnitude crosses several steps from sample to sample; here a step is a 255th of the range and the
    // noise's 31 kHz are a 64th of the converter's rate. Read past the signal and short of the hold's images.
    let converter_hz = 2e6;
    let result = straight(
        "level = 1\n[scheme]\nkind = \"supply\"\nmodulator = { bits = 8, sample_rate = \"2 MHz\" }\nphase_path = { delay = \"250 ns\" }\n",
        &noise(1 << 16, 31_250.0),
    );
    let step_v = 10.0 / 255.0;
    let whole_w = step_v * step_v / 12.0 / (2.0 * 50.0);
    for (from_hz, to_hz) in [(200e3, 400e3), (500e3, 800e3)] {
        let closed_w = {
            let slices = 100;
            let width_hz = (to_hz - from_hz) / f64::from(slices);
            (0..slices)
                .map(|i| {
                    let x = PI * (from_hz + (f64::from(i) + 0.5) * width_hz) / converter_hz;
                    whole_w / converter_hz * (x.sin() / x).powi(2) * width_hz
                })
                .sum::<f64>()
        };
        for (from_hz, to_hz) in [(from_hz, to_hz), (-to_hz, -from_hz)] {
            let found_w = result
                .output_spectrum
                .power_w(from_hz, to_hz)
                .expect("a band");
            let off_db = 10.0 * (found_w / closed_w).log10();
            println!(
                "converter noise {from_hz} to {to_hz} Hz: {off_db:+.3} dB from the closed form"
            );
            assert!(off_db.abs() < 0.3, "{from_hz}: {off_db} dB");
        }
    }
}

#[test]
fn an_ideal_chain_is_clean_whatever_its_gain() {
    let samples = noise(1 << 15, 100_000.0);
    let study = "level = 0.9\n[scheme]\nkind = \"supply\"\n[limits]\nsets = [\"fcc_90_210_mask_d\"]\nchannel = \"110 kHz\"\nevm_percent = 1\n";
    let mut margins: Vec<Vec<f64>> = Vec::new();
    for gain in [
        Complex64::ONE,
        Complex64::from_polar(1.0, 2.5),
        Complex64::from_polar(0.37, -1.0),
    ] {
        let full = Complex64::new(8.0, 6.0) * gain;
        let files = Memory::default()
            .with(
                "map.csv",
                format!(
                    "# frequency = 100 MHz\n# load_resistance = 50 ohm\ncontrol,output_re_v,output_im_v\n0,0,0\n10,{},{}\n",
                    full.re, full.im
                ),
            )
            .with(
                "study.toml",
                format!("map = \"map.csv\"\n[signal]\nfile = \"signal.wav\"\n{study}"),
            )
            .with_signal(&samples);
        let result = carried_out(&files);
        println!("ideal chain: EVM {:.2e} %", result.metrics.evm_percent);
        assert!(result.metrics.evm_percent < 0.01);
        assert!((result.metrics.gain_v / (0.9 * full.norm()) - 1.0).abs() < 1e-6);
        assert!(
            result.metrics.delay_s.abs() < 1e-12,
            "{}",
            result.metrics.delay_s
        );
        assert!(
            (result.metrics.power_dbm - result.wanted_power_dbm(10.0 * 0.9 * gain.norm())).abs()
                < 1e-6
        );
        let mask = result.metrics.mask.iter().map(|segment| segment.margin_db);
        margins.push(mask.collect());
    }
    assert!(!margins[0].is_empty());
    for (other, gain) in margins[1..].iter().zip([1.0f64, 0.37]) {
        // Attenuations below the carrier's own power do not know the gain; where a segment's floor is in watts, its
        // margin grows by as much as the power falls.
        let fall_db = -20.0 * gain.log10();
        for (a, b) in margins[0].iter().zip(other) {
            let moved_db = b - a;
            assert!(
                moved_db.abs() < 1e-6 || (moved_db - fall_db).abs() < 1e-6,
                "{margins:?}"
            );
        }
    }
}

trait WantedPower {
    fn wanted_power_dbm(&self, full_v: f64) -> f64;
}

impl WantedPower for CheckResult {
    /// Mean power of the wanted signal over 50 ohm where its full scale is `full_v`.
    fn wanted_power_dbm(&self, full_v: f64) -> f64 {
        let square = self.wanted_envelope.mean_w * 2.0 * self.map.load_ohm();
        10.0 * (square * full_v * full_v / (2.0 * 50.0)).log10() + 30.0
    }
}

const STAGE: &str = include_str!("../signals/tide-gauge.stage.toml");

fn demo(study: &str) -> Memory {
    Memory::default()
        .with("tide-gauge.stage.toml", STAGE)
        .with(
            "tide-gauge.wav",
            include_bytes!("../signals/tide-gauge.wav").as_slice(),
        )
        .with("study.toml", study)
}

const ALIGNED: &str = include_str!("../signals/tide-gauge.study.toml");
const UNALIGNED: &str = include_str!("../signals/tide-gauge-unaligned.study.toml");

#[test]
fn the_demos_verdicts_and_their_bytes() {
    let outside = carried_out(&demo(UNALIGNED));
    assert_eq!(outside.judgement.verdict.outcome, Outcome::Outside);
    let bytes = |result: &CheckResult| {
        serde_json::to_vec_pretty(&check_document(result)).unwrap_or_else(|error| panic!("{error}"))
    };
    let within = carried_out(&demo(ALIGNED));
    assert_eq!(within.judgement.verdict.outcome, Outcome::Within);
    // The same study twice gives the same bytes.
    assert_eq!(bytes(&within), bytes(&carried_out(&demo(ALIGNED))));
    let tightest = |result: &CheckResult| {
        let checks = result.judgement.verdict.checks.iter();
        checks
            .filter_map(|check| check.margin_db)
            .fold(f64::INFINITY, f64::min)
    };
    println!(
        "demo: unaligned {:+.2} dB, aligned {:+.2} dB",
        tightest(&outside),
        tightest(&within)
    );

    // The map that `map` writes, in place of the stage that it came from, gives the same numbers.
    let stage = Stage::parse("stage", STAGE).unwrap_or_else(|problem| panic!("{problem}"));
    let network = Network::new(&stage).unwrap_or_else(|error| panic!("{error}"));
    let map = Sweep::full(&network, Control::Supply, 201)
        .and_then(|sweep| sweep.solve(&network))
        .unwrap_or_else(|error| panic!("{error}"));
    let study = ALIGNED.replace("stage = \"tide-gauge.stage.toml\"", "map = \"map.csv\"");
    let by_map = carried_out(&demo(&study).with("map.csv", map_csv("tide gauge", &map)));
    let numbers = |metrics: &Metrics| serde_json::to_value(metrics).expect("numbers");
    assert_eq!(numbers(&by_map.metrics), numbers(&within.metrics));
    assert!(by_map.stage.is_none() && within.stage.is_some());
}

fn on_stage(scheme: &str, level: f64, samples: &Samples) -> CheckResult {
    let files = Memory::default()
        .with("stage.toml", STAGE)
        .with(
            "study.toml",
            format!("stage = \"stage.toml\"\n[signal]\nfile = \"signal.wav\"\nlevel = {level}\n[scheme]\nkind = \"supply\"\n{scheme}"),
        )
        .with_signal(samples);
    carried_out(&files)
}

#[test]
fn efficiency_of_a_straight_stage_is_its_orbits() {
    let stage = Stage::parse("stage", STAGE).unwrap_or_else(|problem| panic!("{problem}"));
    let network = Network::new(&stage).unwrap_or_else(|error| panic!("{error}"));
    let drive = Drive::new(&stage.driver, stage.driver.duty);
    let orbit = network
        .orbit(stage.supply_v, &drive)
        .unwrap_or_else(|error| panic!("{error}"));

    // A constant envelope at full supply: output and efficiency are the orbit's. 1e-6: the interpolation of a
    // constant ends in ripple of that size at the file's ends, most of which is left out.
    let constant = on_stage("", 1.0, &carrier()).metrics;
    let expected_dbm = 10.0 * orbit.output_w.log10() + 30.0;
    assert!(
        (constant.power_dbm - expected_dbm).abs() < 1e-4,
        "{constant:?} {expected_dbm}"
    );
    for found in [constant.efficiency, constant.stage_efficiency] {
        let found = found.unwrap_or(f64::NAN);
        assert!(
            (found / orbit.efficiency - 1.0).abs() < 1e-6,
            "{found} {}",
            orbit.efficiency
        );
    }

    // Current follows voltage in a linear stage: its efficiency is the same at every supply, and so on average. With a
    // modulator of efficiency m and idle power P0, the whole is P / (P / (e m) + P0).
    let modulator = "modulator = { efficiency = 0.8, idle = \"200 mW\" }\n";
    let level = 0.9;
    for (name, samples) in [
        ("Gaussian", noise(1 << 15, 100e3)),
        ("two tones", two_tones(511).0),
    ] {
        let found = on_stage(modulator, level, &samples).metrics;
        let mean_w = 10f64.powf((found.power_dbm - 30.0) / 10.0);
        let stage_efficiency = found.stage_efficiency.unwrap_or(f64::NAN);
        assert!(
            (stage_efficiency / orbit.efficiency - 1.0).abs() < 1e-6,
            "{name}: {stage_efficiency}"
        );
        let expected = mean_w / (mean_w / (orbit.efficiency * 0.8) + 0.2);
        let whole = found.efficiency.unwrap_or(f64::NAN);
        // Powers are measured and energies summed over the same instants: six digits agree.
        println!(
            "{name}: stage {stage_efficiency:.6}, whole {whole:.6}, closed form {expected:.6}"
        );
        assert!(
            (whole / expected - 1.0).abs() < 1e-5,
            "{name}: {whole} {expected}"
        );
        if name == "two tones" {
            // Mean power is half of the peak envelope's.
            let half_w = orbit.output_w * level * level / 2.0;
            assert!((mean_w / half_w - 1.0).abs() < 1e-2, "{mean_w} {half_w}");
        }
    }
}
