//! Captures against what is known of them: drift, repeated periods, symbols behind a study's own chain, files of
//! coefficients spoilt at random.

use std::collections::BTreeMap;
use std::f64::consts::TAU;
use std::io::{self, Cursor};

use num_complex::Complex64;
use proptest::prelude::*;
use quietedge::input::{Files, ReadSeek};
use quietedge::limits::Limits;
use quietedge::math::Window;
use quietedge::metrics::{Repeat, SymbolFormat, symbol_errors, synchronize};
use quietedge::predistort::read_polynomial;
use quietedge::signal::{Kind, Modulation, Recipe, Samples, SingleCarrier, make};
use quietedge::study::{MeasureRequest, MeasureResult, Scale, Study, check, measure};

/// Numbers without a pattern, 0 to 1.
struct Draw(u64);

impl Draw {
    fn next(&mut self) -> f64 {
        self.0 = self
            .0
            .wrapping_mul(6_364_136_223_846_793_005)
            .wrapping_add(1_442_695_040_888_963_407);
        ((self.0 >> 11) as f64 + 0.5) * 2f64.powi(-53)
    }

    /// Complex Gaussian noise of mean square 1 (Box and Muller).
    fn noise(&mut self) -> Complex64 {
        let radius = (-self.next().ln()).sqrt();
        Complex64::from_polar(radius, TAU * self.next())
    }
}

/// A sum of tones within +/- 0.06 of the rate, on a grid of 1/1000 and of mean square 1.
fn tones(count: usize, beside: f64) -> Vec<Complex64> {
    let mut draw = Draw(5);
    let lines: Vec<(f64, Complex64)> = (-60..=60)
        .map(|k| {
            let at = (f64::from(k) + beside * (draw.next() - 0.5)) / 1000.0;
            (at, draw.noise() / 11.0)
        })
        .collect();
    (0..count)
        .map(|n| {
            lines
                .iter()
                .map(|(f, a)| a * Complex64::cis(TAU * (f * n as f64).fract()))
                .sum()
        })
        .collect()
}

/// The bound for the rate of change of a frequency is `var >= 90 fs^4 / (pi^2 SNR N^5)` (P. M. Djuric, S. M. Kay,
/// "Parameter estimation of chirp signals", IEEE Trans. Acoust., Speech, Signal Process., Dec. 1990, from memory):
/// 0.0095 Hz/s here. Ten times that is allowed.
#[test]
fn a_drift_is_found_and_none_is_made_up() {
    let x = tones(100_000, 0.9);
    for (seed, drift) in [(1, 300.0), (2, -45.0), (3, 0.0)] {
        let mut draw = Draw(seed);
        let middle_s = 0.05;
        let y: Vec<_> = x
            .iter()
            .enumerate()
            .map(|(n, x)| {
                let t = n as f64 / 1e6 - middle_s;
                let cycles = 1234.5 * t + 0.5 * drift * t * t;
                0.3 * (x * Complex64::cis(TAU * cycles) + 0.01 * draw.noise())
            })
            .collect();
        let sync = synchronize(
            &mut Samples::new(1e6, y),
            &mut Samples::new(1e6, x.clone()),
            Repeat::No,
        )
        .unwrap_or_else(|error| panic!("{error}"));
        println!("{drift}: {sync:?}");
        assert!((sync.drift_hz_per_s - drift).abs() < 0.095, "{sync:?}");
        assert!((sync.frequency_hz - 1234.5).abs() < 0.01, "{sync:?}");
    }
}

fn measured(sent: &[Complex64], received: Vec<Complex64>, repeat: Repeat) -> MeasureResult {
    let request = MeasureRequest {
        file: "received".to_owned(),
        reference: Some("sent".to_owned()),
        repeat,
        limits: Limits::default(),
        scale: Scale::Unknown,
        window: Window::BlackmanHarris,
        resolution_hz: None,
        format: None,
        band_hz: None,
    };
    let mut sent = Samples::new(1e6, sent.to_vec());
    let mut received = Samples::new(1e6, received);
    measure(&request, &mut received, Some(&mut sent), &mut |_| {})
        .unwrap_or_else(|error| panic!("{error}"))
}

/// What one gain leaves of a pair, percent of the output behind that gain.
fn evm_percent(x: &[Complex64], y: &[Complex64]) -> f64 {
    let xx: f64 = x.iter().map(Complex64::norm_sqr).sum();
    let gain: Complex64 = x
        .iter()
        .zip(y)
        .map(|(x, y)| x.conj() * y)
        .sum::<Complex64>()
        / xx;
    let left: f64 = x
        .iter()
        .zip(y)
        .map(|(x, y)| (y / gain - x).norm_sqr())
        .sum();
    100.0 * (left / xx).sqrt()
}

#[test]
fn the_mean_of_the_periods_is_the_bend_without_the_noise() {
    let period = tones(1000, 0.0);
    // A static cubic: the same in every period.
    let bent: Vec<_> = period
        .iter()
        .map(|x| x * (1.0 - 0.01 * x.norm_sqr()))
        .collect();
    let known = evm_percent(&period, &bent);
    let mut draw = Draw(9);
    let sigma = 0.02;
    let received: Vec<_> = (0..80_000)
        .map(|n| bent[(n + 333) % 1000] + sigma * draw.noise())
        .collect();
    let result = measured(&period, received, Repeat::Auto);
    let averaged = result.averaged.expect("periods were averaged");
    println!("{averaged:?}, known {known} %");
    assert!((78..=80).contains(&averaged.periods), "{averaged:?}");
    // Noise of 2 % stands beside a gain of about 0.98; the mean of 79 periods still holds a ninth of it.
    let gain = 0.98;
    let power = (period.iter().map(Complex64::norm_sqr).sum::<f64>() / 1000.0).sqrt();
    let noise = 100.0 * sigma / (gain * power);
    assert!(
        (averaged.noise_percent / noise - 1.0).abs() < 0.03,
        "{averaged:?} {noise}"
    );
    let rest = noise / (averaged.periods as f64).sqrt();
    let expected = known.hypot(rest);
    assert!(
        (averaged.evm_percent / expected - 1.0).abs() < 0.05,
        "{averaged:?} {expected}"
    );
    // The capture as it is holds both.
    let whole = result.metrics.waveform_evm_percent.expect("an EVM");
    assert!((whole / known.hypot(noise) - 1.0).abs() < 0.05, "{whole}");
}

/// Files in memory.
#[derive(Debug, Default)]
struct Memory(BTreeMap<String, Vec<u8>>);

impl Files for Memory {
    fn open(&self, name: &str) -> io::Result<Box<dyn ReadSeek>> {
        let bytes = self.0.get(name).ok_or(io::ErrorKind::NotFound)?;
        Ok(Box::new(Cursor::new(bytes.clone())))
    }
}

/// The symbols behind `check`'s own chain are those of the map applied sample by sample: no outside tool is needed
/// to say what a static curve does.
#[test]
fn symbols_inside_a_check_are_those_of_the_map_itself() {
    let recipe = Recipe {
        kind: Kind::SingleCarrier(SingleCarrier {
            modulation: Modulation::Qam16,
            symbol_rate_hz: 20e3,
            rolloff: 0.3,
            oversampling: 8,
            span: 64,
            symbols: 1500,
            ends: quietedge::signal::Ends::Open,
        }),
        peak: 1.0,
    };
    let sent = make(&recipe, 3).expect("a signal");
    let curve = |u: f64| Complex64::from_polar(20.0 * (1.2 * u - 0.2 * u * u), 0.3 * u * u);
    let mut map = "# control = supply\n# frequency = 100 MHz\n# load_resistance = 50 ohm\ncontrol,output_re_v,output_im_v\n"
        .to_owned();
    for step in 0..=400 {
        let u = f64::from(step) / 400.0;
        let output = curve(u);
        map.push_str(&format!("{},{},{}\n", 8.0 * u, output.re, output.im));
    }
    let text = "map = \"map.csv\"\n[signal]\nfile = \"signal.npy\"\nlevel = 0.8\n[signal.format]\nkind = \"single_carrier\"\n\
                modulation = \"qam16\"\nsymbol_rate = \"20 kHz\"\nrolloff = 0.3\n[scheme]\nkind = \"supply\"\n[limits]\nchannel = \"30 kHz\"\nevm_percent = 5\n";
    let files = Memory(BTreeMap::from([
        ("study.toml".to_owned(), text.as_bytes().to_vec()),
        ("map.csv".to_owned(), map.into_bytes()),
    ]));
    let study = Study::read("study.toml", &files).unwrap_or_else(|problem| panic!("{problem}"));
    let mut source = Samples::new(160e3, sent.as_slice().to_vec());
    let result = check(&study, &mut source, &mut |_| {}).unwrap_or_else(|error| panic!("{error}"));
    let bent: Vec<_> = sent
        .as_slice()
        .iter()
        .map(|x| {
            let m = x.norm();
            if m > 0.0 {
                curve(0.8 * m) * x / m
            } else {
                Complex64::ZERO
            }
        })
        .collect();
    let format = SymbolFormat::SingleCarrier {
        modulation: Modulation::Qam16,
        symbol_rate_hz: 20e3,
        rolloff: 0.3,
    };
    let mut reference = Samples::new(160e3, sent.as_slice().to_vec());
    let by_hand = symbol_errors(
        &format,
        &mut Samples::new(160e3, bent),
        Some(&mut reference),
    )
    .unwrap_or_else(|error| panic!("{error}"));
    println!(
        "check {} %, by hand {} %",
        result.metrics.evm_percent, by_hand.evm_percent
    );
    assert_eq!(result.metrics.evm_of, "symbols");
    assert!(by_hand.evm_percent > 1.0);
    // Start and end are left out differently: some 30 of 1500 symbols.
    assert!((result.metrics.evm_percent - by_hand.evm_percent).abs() < 0.1);
}

const POLYNOMIAL: &str = r#"{"kind":"memory polynomial","version":1,"rate":8,"lead":1,"terms":[
{"signal_lag":1,"envelope_lag":1,"power":0,"re":1.02,"im":-0.01},
{"signal_lag":1,"envelope_lag":0,"power":3,"re":-0.2,"im":0.125}]}"#;

#[test]
fn coefficients_are_read_and_nonsense_is_refused_with_its_reason() {
    let good = read_polynomial("p.json", POLYNOMIAL.as_bytes()).expect("a polynomial");
    assert_eq!((good.lead, good.rate, good.memory()), (1, 8, 1));
    assert_eq!(good.coefficients[1], Complex64::new(-0.2, 0.125));
    for (from, to, said) in [
        ("\"rate\":8", "\"rate\":12", "rate = 12"),
        ("\"lead\":1", "\"lead\":4000000000", "lead = 4000000000"),
        ("\"signal_lag\":1", "\"signal_lag\":1000000000000", "term 1"),
        ("\"power\":3", "\"power\":400", "power 400"),
        ("memory polynomial", "static table", "kind"),
        ("\"version\":1", "\"version\":2", "version 2"),
        ("\"re\":1.02", "\"re\":\"much\"", "line 2"),
    ] {
        let text = POLYNOMIAL.replacen(from, to, 1);
        let problem = read_polynomial("p.json", text.as_bytes())
            .expect_err(to)
            .to_string();
        assert!(
            problem.contains(said) || problem.contains(":2:"),
            "{to}: {problem}"
        );
        assert!(problem.contains("p.json"), "{problem}");
    }
}

proptest! {
    #[test]
    fn any_change_to_a_polynomial_file_is_read_or_refused(
        changes in prop::collection::vec((0usize..400, any::<u8>()), 1..4),
        cut in 0usize..400,
    ) {
        let mut bytes = POLYNOMIAL.as_bytes().to_vec();
        let length = bytes.len();
        for (at, with) in changes {
            bytes[at % length] = with;
        }
        if cut < length {
            bytes.truncate(length - cut / 8);
        }
        if let Ok(polynomial) = read_polynomial("p.json", &bytes[..]) {
            prop_assert_eq!(polynomial.terms.len(), polynomial.coefficients.len());
            let x = vec![Complex64::new(0.3, 0.4); 40];
            prop_assert_eq!(polynomial.apply(&x).len(), 40);
        }
    }
}
