//! Spectrum and EVM of a long stream against the bare transforms they stand on, in one run.
//!
//!     cargo bench --bench spectrum                 10 million samples
//!     cargo bench --bench spectrum -- 100000000    100 million
//!
//! The streams stand for two cf32 files: 32-bit I/Q in memory, widened block by block, which is
//! counted as `reading`. Nothing grows with the number of samples; the peak memory is printed.

use std::hint::black_box;
use std::time::{Duration, Instant};

use num_complex::{Complex32, Complex64};
use quietedge::math::{Transform, Window};
use quietedge::metrics::{
    AlignmentMeter, EnvelopeMeter, ErrorMeter, Hold, SpectrumMeter, SpectrumPlan,
    occupied_bandwidth,
};

/// Samples kept in memory and read again and again.
const POOL: usize = 1 << 20;
const BLOCK: usize = 1 << 14;
const RATE_HZ: f64 = 20e6;

/// Two streams, one after another block: a coloured noise, and itself 40 samples later through a cubic.
struct Files {
    reference: Vec<Complex32>,
    output: Vec<Complex32>,
}

impl Files {
    fn new() -> Self {
        let mut state = 1_u64;
        let mut draw = || {
            state = state
                .wrapping_mul(6_364_136_223_846_793_005)
                .wrapping_add(1_442_695_040_888_963_407);
            (state >> 40) as f32 / (1 << 24) as f32 - 0.5
        };
        let mut slow = Complex32::ZERO;
        let reference: Vec<_> = (0..POOL)
            .map(|_| {
                slow = slow * 0.8 + Complex32::new(draw(), draw());
                slow * 0.3
            })
            .collect();
        let output = (0..POOL)
            .map(|n| {
                let x = reference[(n + POOL - 40) % POOL];
                x * (1.0 - 0.05 * x.norm_sqr()) * 10.0
            })
            .collect();
        Self { reference, output }
    }

    /// Calls `each` with every block of `total` samples and returns the time that widening took.
    fn read(&self, total: usize, mut each: impl FnMut(&[Complex64], &[Complex64])) -> Duration {
        let mut blocks = [vec![Complex64::ZERO; BLOCK], vec![Complex64::ZERO; BLOCK]];
        let mut reading = Duration::ZERO;
        let mut at = 0;
        while at < total {
            let count = BLOCK.min(total - at);
            let from = at % POOL;
            let start = Instant::now();
            for (block, pool) in blocks.iter_mut().zip([&self.reference, &self.output]) {
                for (wide, narrow) in block.iter_mut().zip(&pool[from..from + count]) {
                    *wide = Complex64::new(narrow.re.into(), narrow.im.into());
                }
            }
            reading += start.elapsed();
            each(&blocks[0][..count], &blocks[1][..count]);
            at += count;
        }
        reading
    }
}

/// Time of `count` transforms of `length` points, one after another in place.
fn bare(length: usize, count: usize) -> Duration {
    let mut transform = Transform::new(length);
    let mut data: Vec<_> = (0..length)
        .map(|n| Complex64::new((n % 17) as f64 - 8.0, (n % 23) as f64 - 11.0))
        .collect();
    let fresh = data.clone();
    let start = Instant::now();
    for index in 0..count {
        // The values grow with each transform: begin afresh before they overflow.
        if index % 32 == 0 {
            data.copy_from_slice(&fresh);
        }
        transform.forward(&mut data);
    }
    black_box(&data);
    start.elapsed()
}

fn row(name: &str, total: usize, own: Duration, bare: Duration) {
    let speed = |time: Duration| total as f64 / time.as_secs_f64() / 1e6;
    println!(
        "{name:<34} {:>8.2} s {:>8.1} MS/s   bare {:>8.2} s {:>8.1} MS/s   ratio {:.2}",
        own.as_secs_f64(),
        speed(own),
        bare.as_secs_f64(),
        speed(bare),
        bare.as_secs_f64() / own.as_secs_f64()
    );
}

fn main() -> Result<(), Box<dyn std::error::Error>> {
    let given = std::env::args().skip(1).find_map(|arg| arg.parse().ok());
    let total: usize = given.unwrap_or(10_000_000).max(1_000_000);
    let files = Files::new();
    println!("{total} samples, one thread, 64-bit transforms");

    // First pass: spectrum and envelope of the output, alignment of both.
    let plan = SpectrumPlan {
        length: 8192,
        window: Window::BlackmanHarris,
        overlap: 0.5,
        hold: Hold::None,
    };
    let mut times = [Duration::ZERO; 4];
    let mut spectrum = SpectrumMeter::new(plan, RATE_HZ, 50.0)?;
    let mut envelope = EnvelopeMeter::new(50.0);
    let mut aligning = AlignmentMeter::new(RATE_HZ, 50e-6)?;
    let mut result = Ok(());
    let mut reading = files.read(total, |x, y| {
        let marks = [
            Instant::now(),
            {
                spectrum.push(y);
                Instant::now()
            },
            {
                envelope.push(y);
                Instant::now()
            },
            {
                result = std::mem::replace(&mut result, Ok(())).and(aligning.push(x, y));
                Instant::now()
            },
        ];
        for (time, pair) in times.iter_mut().zip(marks.windows(2)) {
            *time += pair[1] - pair[0];
        }
    });
    result?;
    let spectrum = spectrum.finish()?;
    let alignment = aligning.finish()?;
    let envelope = envelope.finish().ok_or("no power")?;

    // Second pass: the error, in a band.
    let mut errors = ErrorMeter::new(alignment, RATE_HZ, Some(10e6))?;
    let mut result = Ok(());
    reading += files.read(total, |x, y| {
        let start = Instant::now();
        result = std::mem::replace(&mut result, Ok(())).and(errors.push(x, y));
        times[3] += start.elapsed();
    });
    result?;
    let figures = errors.finish()?;

    // The same transforms, bare. Alignment: 2 for each block of 8192 less 2 (1001 + 128) samples; error:
    // 2 forward and 3 back for each block of 8192 less twice its filters' support.
    let spectra = spectrum.segments as usize;
    let aligned = 2 * total / (8192 - 2 * (1001 + 128));
    let compared = 5 * total / (8192 - 2 * 178);
    let bare = [
        bare(8192, spectra),
        Duration::ZERO,
        bare(8192, aligned),
        bare(8192, compared),
    ];
    row("spectrum, 8192, half overlapped", total, times[0], bare[0]);
    println!(
        "{:<34} {:>8.2} s {:>8.1} MS/s",
        "mean, peak, distribution",
        times[1].as_secs_f64(),
        total as f64 / times[1].as_secs_f64() / 1e6
    );
    row("alignment, 50 us either way", total, times[2], bare[2]);
    row("error in a band of 10 MHz", total, times[3], bare[3]);
    row(
        "all passes",
        total,
        times.iter().sum(),
        bare.iter().sum::<Duration>(),
    );
    row(
        "all passes and reading",
        total,
        times.iter().sum::<Duration>() + reading,
        bare.iter().sum::<Duration>() + reading,
    );
    println!(
        "delay {:.6} samples, EVM {:.4} %, NMSE {:.2} dB, PAPR {:.2} dB, occupied {:.0} Hz",
        alignment.delay_s * RATE_HZ,
        figures.evm_percent,
        figures.nmse_db,
        envelope.papr_db,
        occupied_bandwidth(&spectrum, 0.99)?.width_hz()
    );
    // Linux only; elsewhere there is no such file.
    let status = std::fs::read_to_string("/proc/self/status").unwrap_or_default();
    if let Some(line) = status.lines().find(|line| line.starts_with("VmHWM")) {
        println!("peak memory {}", line.trim_start_matches("VmHWM:").trim());
    }
    Ok(())
}
