//! Speed of one linear orbit and of a 201-point map, beside the time of plain matrix exponentials in the
//! same run: `cargo bench --bench orbit`.

use std::hint::black_box;
use std::time::Instant;

use nalgebra::SMatrix;
use quietedge::orbit::{Drive, Network};
use quietedge::stage::Stage;

/// A four-state stage: feed, drain capacitance, series inductor and capacitor.
const STAGE: &str = r#"
frequency = "169.4 MHz"
supply = { voltage = "6 V" }
switch = { closed_resistance = "0.18 ohm" }
drain = { capacitance = "47 pF" }
feed = { inductance = "8.2 nH", resistance = "50 mohm" }
[load]
resistance = "7 ohm"
[[load.ladder]]
series = { inductance = "33 nH", q = 80 }
[[load.ladder]]
series = { capacitance = "30 pF" }
"#;

fn seconds_each(repeats: u32, mut work: impl FnMut()) -> f64 {
    // The best of five rounds: the least disturbed one.
    (0..5)
        .map(|_| {
            let start = Instant::now();
            for _ in 0..repeats {
                work();
            }
            start.elapsed().as_secs_f64() / f64::from(repeats)
        })
        .fold(f64::INFINITY, f64::min)
}

fn main() {
    let stage = Stage::parse("bench.toml", STAGE).expect("the stage above");
    let network = Network::new(&stage).expect("a network");
    let drive = Drive::new(&stage.driver, stage.driver.duty);
    assert_eq!(network.states(), 4);

    let matrix = SMatrix::<f64, 4, 4>::from_fn(|i, j| ((3 * i + 5 * j) % 7) as f64 - 3.0);
    let reference = seconds_each(20_000, || {
        black_box(black_box(matrix).exp());
    });
    let orbit = seconds_each(20_000, || {
        black_box(network.orbit(black_box(6.0), &drive).expect("an orbit"));
    });
    let map = seconds_each(20, || {
        for step in 0..=200 {
            let duty = 0.2 + 0.3 * f64::from(step) / 200.0;
            black_box(
                network
                    .orbit(6.0, &Drive::new(&stage.driver, duty))
                    .expect("an orbit"),
            );
        }
    });
    println!(
        "one 4x4 exponential by nalgebra   {:8.3} us",
        reference * 1e6
    );
    println!(
        "one 4-state orbit                 {:8.3} us   {:5.1} exponentials",
        orbit * 1e6,
        orbit / reference
    );
    println!("a 201-point width map             {:8.3} ms", map * 1e3);
}
