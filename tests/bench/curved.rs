//! Speed of one curved orbit and of a 201-point curved supply map, beside SciPy on the same stage in the same run
//! where it can be imported: `cargo bench --bench curved`.

use std::hint::black_box;
use std::process::Command;
use std::time::Instant;

use quietedge::map::{Control, Sweep};
use quietedge::orbit::{Drive, Network};
use quietedge::stage::Stage;

/// Junction capacitance alone.
const JUNCTION: &str = include_str!("../reference/bench_junction.stage.toml");

/// Junction, diode, gate coupling and knee.
const EVERYTHING: &str = include_str!("../reference/bench_everything.stage.toml");

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
    for (name, text) in [("junction", JUNCTION), ("everything", EVERYTHING)] {
        let stage = Stage::parse(name, text).expect("the stage");
        let network = Network::new(&stage).expect("a network");
        let drive = Drive::new(&stage.driver, stage.driver.duty);
        let supply_v = stage.supply_v;
        let first = network.orbit(supply_v, &drive).expect("an orbit");
        let orbit = seconds_each(200, || {
            black_box(
                network
                    .orbit(black_box(supply_v), &drive)
                    .expect("an orbit"),
            );
        });
        let sweep = Sweep::full(&network, Control::Supply, 201).expect("a sweep");
        let map = seconds_each(3, || {
            black_box(sweep.solve(&network).expect("a map"));
        });
        println!(
            "{name:12} {} states, {} conductions: one cold orbit {:8.3} ms, a 201-point supply map {:8.2} ms, residual {:.1e}",
            network.states(),
            first.diode_conductions,
            orbit * 1e3,
            map * 1e3,
            first.energy_residual,
        );
        scipy(name, orbit);
    }
}

/// One orbit of the same stage by the reference script, in seconds of its own clock.
fn scipy(name: &str, orbit_s: f64) {
    let folder = concat!(env!("CARGO_MANIFEST_DIR"), "/tests/reference");
    let output = Command::new("python3")
        .current_dir(folder)
        .env("PYTHONDONTWRITEBYTECODE", "1")
        .args(["curved.py", "--time", &format!("bench_{name}.stage.toml")])
        .output();
    let seconds = output
        .ok()
        .filter(|output| output.status.success())
        .and_then(|output| String::from_utf8(output.stdout).ok())
        .and_then(|text| text.trim().parse::<f64>().ok());
    match seconds {
        Some(seconds) => println!(
            "{:12} SciPy shooting {seconds:.2} s: {:.0} times as long",
            "",
            seconds / orbit_s
        ),
        None => println!("{:12} SciPy skipped: python3 cannot import it here", ""),
    }
}
