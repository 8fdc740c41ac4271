//! Fits against NumPy's `lstsq` on the same matrix (`tests/reference/polynomial.py`).

use num_complex::Complex64;
use quietedge::drive::{Polynomial, Term};
use quietedge::math::least_squares::LeastSquares;
use quietedge::predistort::{Form, PolynomialSize, choose, fit};
use serde_json::Value;

fn document() -> Value {
    serde_json::from_str(include_str!("../reference/polynomial.json")).expect("polynomial.json")
}

fn complex(value: &Value) -> Complex64 {
    Complex64::new(
        value[0].as_f64().expect("re"),
        value[1].as_f64().expect("im"),
    )
}

fn complexes(value: &Value) -> Vec<Complex64> {
    value
        .as_array()
        .expect("a list")
        .iter()
        .map(complex)
        .collect()
}

fn terms(value: &Value) -> Vec<Term> {
    let whole = |value: &Value| value.as_u64().expect("a whole number");
    let rows = value.as_array().expect("terms").iter();
    rows.map(|row| Term {
        signal_lag: whole(&row[0]) as usize,
        envelope_lag: whole(&row[1]) as usize,
        power: whole(&row[2]) as u32,
    })
    .collect()
}

/// The same samples as NumPy's, to rounding.
fn signal(document: &Value) -> Vec<Complex64> {
    let tones: Vec<Complex64> = complexes(&document["tones"]);
    (0..document["samples"].as_u64().expect("samples"))
        .map(|n| {
            let turn = |tone: &Complex64| std::f64::consts::TAU * (tone.im * n as f64);
            tones
                .iter()
                .map(|tone| tone.re * Complex64::cis(turn(tone)))
                .sum()
        })
        .collect()
}

fn truth(document: &Value) -> Polynomial {
    Polynomial {
        terms: terms(&document["truth"]["terms"]),
        coefficients: complexes(&document["truth"]["coefficients"]),
        lead: 0,
        rate: 1,
    }
}

#[test]
fn coefficients_agree_with_numpy() {
    let document = document();
    let x = signal(&document);
    let plain = truth(&document).apply(&x);
    let stored = complexes(&document["output"]);
    for (got, expected) in plain.iter().zip(&stored) {
        assert!((got - expected).norm() < 1e-12, "{got} {expected}");
    }
    let bent: Vec<Complex64> = plain
        .iter()
        .zip(&x)
        .map(|(y, x)| y * Complex64::cis(0.3 * x.norm_sqr()) / (1.0 + x.norm_sqr()).sqrt())
        .collect();
    let systems = document["systems"].as_array().expect("systems");
    assert_eq!(systems.len(), 3);
    for (system, output) in systems.iter().zip([&plain, &bent, &bent]) {
        let name = system["name"].as_str().expect("a name");
        let terms = terms(&system["terms"]);
        let reach = terms
            .iter()
            .map(|term| term.signal_lag.max(term.envelope_lag))
            .max();
        let mut least_squares = LeastSquares::new(terms.len());
        for (at, target) in output.iter().enumerate().skip(reach.expect("terms")) {
            least_squares.push(terms.iter().map(|term| term.value(&x, at)), *target);
        }
        let solution = least_squares.solve(0.0).expect("a solution");
        let expected = complexes(&system["coefficients"]);
        let largest = expected.iter().map(|c| c.norm()).fold(0.0, f64::max);
        for (got, expected) in solution.coefficients.iter().zip(&expected) {
            assert!(
                (got - expected).norm() <= 1e-9 * largest,
                "{name}: {got} {expected}"
            );
        }
        let condition = system["condition"].as_f64().expect("a condition number");
        assert!(
            (solution.condition / condition - 1.0).abs() < 1e-6,
            "{name}: {}",
            solution.condition
        );
        let residual = system["residual_square"].as_f64().expect("a residual");
        if residual > 1e-12 {
            let got = solution.residual_square;
            assert!(
                (got / residual - 1.0).abs() < 1e-8,
                "{name}: {got} {residual}"
            );
        }
    }
}

#[test]
fn a_memory_polynomial_without_noise_is_recovered() {
    let document = document();
    let x = signal(&document);
    let truth = truth(&document);
    let size = PolynomialSize {
        form: Form::Memory,
        power: 4,
        memory: 2,
        cross: 0,
    };
    let found = fit(&size, 1, 0.0, &x, &truth.apply(&x)).expect("a fit");
    assert_eq!(found.polynomial.terms, truth.terms);
    for (got, expected) in found
        .polynomial
        .coefficients
        .iter()
        .zip(&truth.coefficients)
    {
        assert!((got - expected).norm() < 1e-6, "{got} {expected}");
    }
    assert!(found.nmse_db < -200.0);
}

#[test]
fn cross_validation_takes_the_size_that_made_the_samples() {
    // Two lags and the power 2 make the samples; noise at -60 dB hides what larger sizes would add.
    let document = document();
    let x = signal(&document);
    let size = PolynomialSize {
        form: Form::Memory,
        power: 2,
        memory: 1,
        cross: 0,
    };
    let coefficients = [1.0, 0.05, -0.3, 0.1, -0.04, 0.08].map(|re| Complex64::new(re, 0.3 * re));
    let polynomial = Polynomial {
        terms: size.terms(),
        coefficients: coefficients.to_vec(),
        lead: 0,
        rate: 1,
    };
    let noise = |n: usize| 1e-3 * Complex64::cis((n * n) as f64 * 2.399_963 + (n as f64).sqrt());
    let output: Vec<Complex64> = polynomial
        .apply(&x)
        .iter()
        .enumerate()
        .map(|(n, y)| y + 0.4 * noise(n))
        .collect();
    let choice = choose(Form::Memory, 0.0, &x, &output).expect("a choice");
    assert_eq!(
        (choice.chosen.power, choice.chosen.memory),
        (2, 1),
        "{:?}",
        choice.candidates
    );
}
