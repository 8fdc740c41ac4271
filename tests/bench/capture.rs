//! A capture of ten million samples held against its reference: every number, in one run.
//!
//!     cargo bench --bench capture

use std::time::Instant;

use num_complex::Complex64;
use quietedge::limits::Limits;
use quietedge::math::Window;
use quietedge::metrics::Repeat;
use quietedge::signal::{SignalError, Source};
use quietedge::study::{MeasureRequest, Scale, measure};

const RATE_HZ: f64 = 20e6;
const SAMPLES: u64 = 10_000_000;

/// A coloured noise made as it is read; the capture is turned and bent.
struct Noise {
    state: u64,
    slow: [Complex64; 3],
    next: u64,
    capture: bool,
}

impl Noise {
    fn new(capture: bool) -> Self {
        Self {
            state: 1,
            slow: [Complex64::ZERO; 3],
            next: 0,
            capture,
        }
    }

    fn draw(&mut self) -> f64 {
        self.state = self
            .state
            .wrapping_mul(6_364_136_223_846_793_005)
            .wrapping_add(1_442_695_040_888_963_407);
        (self.state >> 11) as f64 * 2f64.powi(-53) - 0.5
    }
}

impl Source for Noise {
    fn rate_hz(&self) -> f64 {
        RATE_HZ
    }

    fn len(&self) -> Option<u64> {
        Some(SAMPLES)
    }

    fn read(&mut self, block: &mut [Complex64]) -> Result<usize, SignalError> {
        let count = block.len().min((SAMPLES - self.next) as usize);
        for sample in &mut block[..count] {
            let mut value = Complex64::new(self.draw(), self.draw());
            for slow in &mut self.slow {
                *slow = 0.75 * *slow + 0.25 * value;
                value = *slow;
            }
            *sample = value;
            if self.capture {
                let phase = std::f64::consts::TAU * (6e-5 * self.next as f64).fract();
                *sample = value * (1.0 - 2.0 * value.norm_sqr()) * Complex64::cis(phase);
            }
            self.next += 1;
        }
        Ok(count)
    }

    fn rewind(&mut self) -> Result<(), SignalError> {
        *self = Self::new(self.capture);
        Ok(())
    }
}

fn main() -> Result<(), Box<dyn std::error::Error>> {
    let request = MeasureRequest {
        file: "capture".to_owned(),
        reference: Some("reference".to_owned()),
        repeat: Repeat::No,
        limits: Limits::default(),
        scale: Scale::Unknown,
        window: Window::BlackmanHarris,
        resolution_hz: None,
        format: None,
        band_hz: Some(6e6),
    };
    let begun = Instant::now();
    let mut reference = Noise::new(false);
    let result = measure(
        &request,
        &mut Noise::new(true),
        Some(&mut reference),
        &mut |_| {},
    )?;
    println!(
        "{SAMPLES} samples with reference: {:.2} s, EVM {:.4} %, frequency {:.6} Hz",
        begun.elapsed().as_secs_f64(),
        result.metrics.evm_percent.unwrap_or(f64::NAN),
        result.sync.map_or(f64::NAN, |sync| sync.frequency_hz)
    );
    // Linux only; elsewhere there is no such file.
    let status = std::fs::read_to_string("/proc/self/status").unwrap_or_default();
    if let Some(line) = status.lines().find(|line| line.starts_with("VmHWM")) {
        println!("peak memory {}", line.trim_start_matches("VmHWM:").trim());
    }
    Ok(())
}
