//! Speed of the replay of a four-state stage, supply and phase moving in every carrier cycle:
//! `cargo bench --bench replay`. Times are those that the thread was on a core, where the system tells (Linux), so that
//! other work on the machine counts little. With python3 and SciPy at hand, the same stage by SciPy in the same run.

use std::hint::black_box;
use std::process::Command;
use std::time::Instant;

use quietedge::orbit::{Drive, Network};
use quietedge::stage::Stage;
use quietedge::transmit::{Account, Cycle, Form, Pulse, Replay, Setup};

/// The stage of `tests/reference/replay.py`.
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

const CYCLES: u32 = 1_000_000;

fn main() {
    let stage = Stage::parse("bench.toml", STAGE).expect("the stage above");
    let network = Network::new(&stage).expect("a network");
    let drive = Drive::new(&stage.driver, stage.driver.duty);
    assert_eq!(network.states(), 4);
    let nested = Setup {
        form: Form::Nested,
        ..Setup::of(Account::Supply)
    };
    let mut best = 0.0f64;
    for (name, setup) in [
        ("envelope", Setup::of(Account::Envelope)),
        ("envelope, supply energy", Setup::of(Account::Supply)),
        ("envelope, every loss apart", Setup::of(Account::Losses)),
        ("envelope, supply energy; nested tables", nested),
    ] {
        // The best of five rounds: the least disturbed one.
        let seconds = (0..5)
            .map(|_| round(&network, &drive, setup))
            .fold(f64::INFINITY, f64::min);
        let rate = f64::from(CYCLES) / seconds;
        best = best.max(rate);
        println!(
            "{name:40} {:6.3} million cycles/s {:6.0} ns a cycle",
            1e-6 * rate,
            1e9 / rate
        );
    }
    let scipy = Command::new("python3")
        .args(["tests/reference/replay.py", "--time"])
        .output();
    match scipy {
        Ok(output) if output.status.success() => {
            let text = String::from_utf8_lossy(&output.stdout);
            println!("SciPy, envelope, time on a core:");
            for line in text.lines() {
                let rate = line.split_whitespace().rev().nth(1);
                let rate = rate.and_then(|rate| rate.parse::<f64>().ok());
                let ratio = rate.map_or(f64::NAN, |rate| best / rate);
                println!("{line}   fastest above over it: {ratio:.0}");
            }
        }
        _ => println!("SciPy is not at hand: no comparison"),
    }
}

/// Seconds for all cycles, supply and phase moving in each.
fn round(network: &Network, drive: &Drive, setup: Setup) -> f64 {
    let mut replay = Replay::new(network, drive, setup).expect("a replay");
    let start = Clock::start();
    let (mut supply_v, mut phase_rad) = (1.0, 0.0);
    for n in 0..CYCLES {
        let step = f64::from(n % 1000) - 499.5;
        let (rise, turn) = (1e-5 * step, 2e-6 * step);
        let out = replay.cycle(&Cycle {
            supply_v: [supply_v, supply_v + rise],
            pulse: Pulse::phased(drive, phase_rad, turn),
        });
        black_box(out.expect("a cycle"));
        supply_v += rise;
        phase_rad += turn;
    }
    start.seconds()
}

/// Time of this thread on a core, or of the wall.
struct Clock {
    wall: Instant,
    core: Option<f64>,
}

impl Clock {
    fn start() -> Self {
        Self {
            wall: Instant::now(),
            core: core_seconds(),
        }
    }

    fn seconds(&self) -> f64 {
        let core = core_seconds()
            .zip(self.core)
            .map(|(end, start)| end - start);
        core.unwrap_or(self.wall.elapsed().as_secs_f64())
    }
}

fn core_seconds() -> Option<f64> {
    let text = std::fs::read_to_string("/proc/thread-self/schedstat").ok()?;
    let nanoseconds: f64 = text.split_whitespace().next()?.parse().ok()?;
    Some(1e-9 * nanoseconds)
}
