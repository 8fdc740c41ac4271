//! Tables at work in the whole chain, against closed forms.

use num_complex::Complex64;
use quietedge::drive::{Between, LookupSize, Shape, Shaping};
use quietedge::predistort::{Table, TableRequest, json};
use quietedge::signal::Samples;
use quietedge::study::{CheckResult, Study, check};

use super::{Memory, map_of, map_text};

const FULL_V: f64 = 8.0;
const RATE_HZ: f64 = 1e6;
const LEVEL: f64 = 0.9;

/// Tones at multiples of 1/500 of the rate within +/- 0.1 of it, with scattered phases; highest magnitude 1.
fn signal() -> Vec<Complex64> {
    let mut samples: Vec<Complex64> = (0..20_000)
        .map(|n| {
            let tone = |k: i32| {
                let phase = f64::from(k * k) * 0.734 + f64::from(k * k * k) * 0.171;
                // Slightly off the grid, so that the signal does not repeat.
                Complex64::cis(
                    std::f64::consts::TAU
                        * (f64::from(k) / 500.0 + 1.3e-6 * f64::from(k * k))
                        * f64::from(n)
                        + phase,
                )
            };
            (-50..=50).map(tone).sum()
        })
        .collect();
    let peak = samples.iter().map(|x| x.norm()).fold(0.0, f64::max);
    samples.iter_mut().for_each(|x| *x /= peak);
    samples
}

fn study(files: &Memory, predistort: &str) -> Study {
    let text = format!(
        "map = \"map.csv\"\n[signal]\nfile = \"signal.npy\"\nlevel = {LEVEL}\n\
         [scheme]\nkind = \"supply\"\n{predistort}\n[limits]\nchannel = \"220 kHz\"\nevm_percent = 1\n"
    );
    let mut all = Memory(files.0.clone());
    all.0.insert("study.toml".to_owned(), text.into_bytes());
    Study::read("study.toml", &all).unwrap_or_else(|problem| panic!("{problem}"))
}

fn carry_out(study: &Study, samples: &[Complex64]) -> CheckResult {
    let mut source = Samples::new(RATE_HZ, samples.to_vec());
    check(study, &mut source, &mut |_| {}).unwrap_or_else(|error| panic!("{error}"))
}

fn acpr_db(result: &CheckResult) -> f64 {
    let pair = result.metrics.acpr[0];
    0.5 * (pair.lower_db + pair.upper_db)
}

/// Mean of `value` over the signal's magnitude, as a part of the control's range.
fn mean(samples: &[Complex64], value: impl Fn(f64) -> f64) -> f64 {
    samples.iter().map(|x| value(LEVEL * x.norm())).sum::<f64>() / samples.len() as f64
}

/// Rounding to words is white noise over the table's rate where the signal crosses many steps from one sample
/// to the next (W. R. Bennett, "Spectra of quantized signals", Bell Syst. Tech. J., July 1948): variance
/// step^2 / 12 along the phasor, magnified by the stage's slope, and magnitude^2 step^2 / 12 across it. The hold
/// shapes it by sinc^2. What falls into a channel of width B at offset f over the wanted power is
///
/// ```text
/// (E[(A'(u) step_u)^2] + E[|a|^2] step_phase^2) / 12 / E[|a|^2]  B / R  sinc^2(f / R)
/// ```
fn predicted_db(
    samples: &[Complex64],
    size: &LookupSize,
    rate: f64,
    slope: impl Fn(f64) -> f64,
) -> f64 {
    let power = mean(samples, |m| m * m);
    let along = mean(samples, |m| slope(m).powi(2)) * size.control_step().powi(2) / 12.0;
    let across = power * size.phase_step_rad().powi(2) / 12.0;
    let table_hz = rate * RATE_HZ;
    let x = std::f64::consts::PI * 220e3 / table_hz;
    10.0 * ((along + across) / power * 220e3 / table_hz * (x.sin() / x).powi(2)).log10()
}

/// `a = 1.3 u - 0.3 u^2` of full output, phase `1.5 u^2` rad: the correction crosses many steps of 9 bits.
fn bent(u: f64) -> Complex64 {
    Complex64::from_polar(20.0 * (1.3 * u - 0.3 * u * u), 1.5 * u * u)
}

#[test]
fn verified_acpr_lies_at_the_quantization_limit() {
    let samples = signal();
    let mut files = Memory::default();
    files
        .0
        .insert("map.csv".to_owned(), map_text(&map_of(FULL_V, 2001, bent)));
    let before = carry_out(&study(&files, ""), &samples);
    assert!(acpr_db(&before) > -45.0, "{}", acpr_db(&before));
    // With a = 1.3 u - 0.3 u^2: A'(u) = 1.3 - 0.6 u at u = (1.3 - sqrt(1.69 - 1.2 m)) / 0.6, which is
    // sqrt(1.69 - 1.2 m).
    for (rate, amplitude_bits, phase_bits) in [(4, 8, 16), (4, 16, 9), (8, 9, 10)] {
        let request = format!(
            "[predistort]\ndepth = 4096\naddress_bits = 24\namplitude_bits = {amplitude_bits}\nphase_bits = {phase_bits}\nrate = {rate}"
        );
        let result = carry_out(&study(&files, &request), &samples);
        let size = *result.table.as_ref().expect("a table").lookup.size();
        let predicted = predicted_db(&samples, &size, f64::from(rate), |m| {
            (1.69 - 1.2 * m).sqrt()
        });
        let got = acpr_db(&result);
        println!("{rate} {amplitude_bits} {phase_bits}: {got:.2} dB, predicted {predicted:.2} dB");
        assert!((got - predicted).abs() < 1.0, "{got} {predicted}");
    }
    // Fine words reach far below, so that the limit above is the words' own.
    let fine = carry_out(
        &study(
            &files,
            "[predistort]\ndepth = 4096\naddress_bits = 24\namplitude_bits = 20\nphase_bits = 20",
        ),
        &samples,
    );
    assert!(acpr_db(&fine) < -85.0, "{}", acpr_db(&fine));
}

#[test]
fn a_table_from_a_file_does_what_the_request_does() {
    let samples = &signal()[..6000];
    let map = map_of(FULL_V, 401, bent);
    let mut files = Memory::default();
    files.0.insert("map.csv".to_owned(), map_text(&map));
    let request = TableRequest {
        size: LookupSize {
            depth: 100,
            address_bits: 15,
            amplitude_bits: 11,
            phase_bits: 9,
        },
        between: Between::Linear,
        rate: 4,
        ..TableRequest::default()
    };
    let shaping = Shaping {
        shape: Shape::Exponential,
        floor: 0.0,
    };
    let table = Table::from_map("file", &map, FULL_V, &shaping, &request).expect("a table");
    files.0.insert(
        "table.json".to_owned(),
        serde_json::to_vec(&json(&table)).expect("JSON"),
    );
    let from_file = carry_out(
        &study(&files, "[predistort]\ntable = \"table.json\""),
        samples,
    );
    let inline = "[predistort]\ndepth = 100\naddress_bits = 15\namplitude_bits = 11\nphase_bits = 9\nrate = 4";
    let from_request = carry_out(&study(&files, inline), samples);
    assert_eq!(from_file.metrics, from_request.metrics);
    assert_eq!(from_file.judgement.verdict, from_request.judgement.verdict);
    let plain = carry_out(&study(&files, ""), samples);
    assert!(plain.metrics.evm_percent > 5.0 * from_file.metrics.evm_percent);

    // A table for another range is refused.
    let mut other = json(&table);
    other["full_control"] = 7.0.into();
    files.0.insert(
        "table.json".to_owned(),
        serde_json::to_vec(&other).expect("JSON"),
    );
    let study = study(&files, "[predistort]\ntable = \"table.json\"");
    let mut source = Samples::new(RATE_HZ, samples.to_vec());
    let error = check(&study, &mut source, &mut |_| {}).expect_err("another range");
    assert!(error.to_string().contains("full control of 7 V"), "{error}");
}

#[test]
fn keys_that_make_no_table_are_refused_with_their_place() {
    let mut files = Memory::default();
    files
        .0
        .insert("map.csv".to_owned(), map_text(&map_of(FULL_V, 11, bent)));
    let refused = |predistort: &str| {
        let text = format!(
            "map = \"map.csv\"\n[signal]\nfile = \"s.npy\"\nlevel = 0.9\n[scheme]\nkind = \"supply\"\n[predistort]\n{predistort}\n"
        );
        let mut all = Memory(files.0.clone());
        all.0.insert("study.toml".to_owned(), text.into_bytes());
        Study::read("study.toml", &all)
            .expect_err("refused")
            .to_string()
    };
    for (given, said) in [
        ("depth = 1", "depth"),
        ("depth = 65537", "depth"),
        ("phase_bits = 25", "phase_bits"),
        ("rate = 12", "power of two"),
        ("spacing = \"cubic\"", "spacing"),
        ("mu = 3", "companded"),
        ("below_floor = \"off\"", "below_floor"),
        ("table = \"none.json\"", "none.json"),
        ("table = \"map.csv\"", "table.json"),
        ("deepth = 3", "deepth"),
    ] {
        let text = refused(given);
        assert!(text.contains(said), "{given}: {text}");
    }
}
