//! The pulses of a gate as files that a simulator or another study reads.

use std::fmt::Write as _;
use std::io;

use vcd::{TimescaleUnit, Value, VarType};

use crate::study::GateTrain;

/// Time unit of the dump, s.
const TICK_S: f64 = 1e-12;

/// Edges as `time,level`: seconds from the signal's first sample, to the last digit.
pub fn gate_csv(train: &GateTrain) -> String {
    let mut text = String::from(
        "# the gate's edges; time in seconds from the signal's first sample\ntime,level\n",
    );
    for edge in train.edges.iter().filter(|edge| edge.time_s >= 0.0) {
        // Writing to a string cannot fail.
        let _ = writeln!(text, "{},{}", edge.time_s, edge.level);
    }
    text
}

/// A value change dump (IEEE 1364) in picoseconds: one wire `burst.gate`, or a real where there are more levels than two.
///
/// # Errors
/// None in memory; the library's face.
pub fn gate_vcd(train: &GateTrain) -> io::Result<Vec<u8>> {
    let mut bytes = Vec::new();
    let mut writer = vcd::Writer::new(&mut bytes);
    let wire = train
        .edges
        .iter()
        .all(|edge| edge.level == 0.0 || edge.level == 1.0);
    writer.comment("times rounded to 1 ps, from the signal's first sample")?;
    writer.timescale(1, TimescaleUnit::PS)?;
    writer.add_module("burst")?;
    let gate = if wire {
        writer.add_wire(1, "gate")?
    } else {
        writer.add_var(VarType::Real, 64, "gate", None)?
    };
    writer.upscope()?;
    writer.enddefinitions()?;
    let mut stamps = Vec::with_capacity(train.edges.len() + 1);
    stamps.push((0u64, 0.0));
    for edge in train.edges.iter().filter(|edge| edge.time_s >= 0.0) {
        let tick = (edge.time_s / TICK_S).round() as u64;
        match stamps.last_mut() {
            // Two edges within a picosecond: the later one counts.
            Some(last) if last.0 == tick => last.1 = edge.level,
            _ => stamps.push((tick, edge.level)),
        }
    }
    for (tick, level) in stamps {
        writer.timestamp(tick)?;
        if wire {
            let value = if level == 1.0 { Value::V1 } else { Value::V0 };
            writer.change_scalar(gate, value)?;
        } else {
            writer.change_real(gate, level)?;
        }
    }
    Ok(bytes)
}
