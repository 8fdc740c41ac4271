//! From the sums over a period to the figures of an [`Orbit`].

use std::f64::consts::{PI, TAU};

use super::balance::{Losses, Orbit};
use super::circuit::Owner;
use super::device::{Side, Throw};
use super::engine::Engine;
use super::gather::Gathered;
use super::network::{Drive, HARMONICS, OrbitError};
use super::period::State;
use super::port::{Port, Row, Source};
use crate::stage::Stage;

pub fn at_rest(orbit: Orbit) -> Orbit {
    let none = |watt: f64| watt * 0.0;
    Orbit {
        supply_v: 0.0,
        output_v: orbit.output_v * 0.0,
        output_w: 0.0,
        supply_a: 0.0,
        supply_w: 0.0,
        losses: Losses {
            closed_switch: 0.0,
            open_switch: 0.0,
            diode: 0.0,
            feed: 0.0,
            ladder: 0.0,
            rungs: orbit.losses.rungs.iter().map(|&w| none(w)).collect(),
            harmonics: 0.0,
            driver: orbit.losses.driver,
        },
        switch_peak_v: 0.0,
        switch_min_v: 0.0,
        switch_peak_a: 0.0,
        switch_min_a: 0.0,
        closing_v: 0.0,
        closing_slope_v_per_s: 0.0,
        ..orbit
    }
}

#[expect(clippy::too_many_arguments, reason = "one call, all of it needed")]
pub fn orbit(
    stage: &Stage,
    port: &Port,
    engine: &Engine,
    sums: &Gathered,
    end: &State,
    slope: f64,
    supply_v: f64,
    drive: &Drive,
) -> Result<Orbit, OrbitError> {
    let load_ohm = stage.load.ohm;
    // Normalised powers are volts squared.
    let watt = |integral: f64| integral / TAU / load_ohm;
    let size = port.rest + 2;
    let square = |row: &Row| {
        let full: Vec<f64> = std::iter::once(row.v)
            .chain(row.x.iter().copied())
            .chain([row.u])
            .collect();
        let mut sum = 0.0;
        for p in 0..size {
            for q in 0..size {
                sum += full[p] * full[q] * sums.moment[p * size + q];
            }
        }
        sum.max(0.0)
    };
    let mean = |row: &Row| {
        row.at(
            sums.first[0],
            &sums.first[1..size - 1],
            sums.first[size - 1],
        ) / TAU
    };
    let output_v = sums.harmonics[0] / PI;
    let output_w = output_v.norm_sqr() / (2.0 * load_ohm);
    let supply_a = mean(&port.supply) / load_ohm;
    let supply_w = supply_a * supply_v;
    let rung_count = stage.ladder.len();
    let mut losses = Losses {
        closed_switch: watt(sums.closed_switch),
        open_switch: watt(sums.open_switch),
        diode: watt(sums.diode),
        feed: match port.source {
            Source::Choke(ohm) => watt(ohm * end.u * end.u * TAU),
            Source::Voltage => 0.0,
        },
        ladder: 0.0,
        rungs: vec![0.0; rung_count],
        harmonics: -output_w,
        driver: 0.0,
    };
    for (owner, ohm, current) in &port.resistors {
        let loss = watt(ohm * square(current));
        match owner {
            Owner::Contact(_) => {}
            Owner::Feed => losses.feed += loss,
            Owner::Rung(index) => losses.rungs[*index] += loss,
            Owner::Load => losses.harmonics += loss,
        }
    }
    losses.ladder = losses.rungs.iter().fold(0.0, |sum, loss| sum + loss);
    // What the edges deliver into the drain, and what the driver draws for it from a rail at the swing: charge
    // that flows while the gate is at or on its way to the rail. The difference heats the driver.
    let delivered_w = watt(sums.edges);
    let rail_w = stage.driver.gate.map_or(0.0, |gate| {
        if stage.gate_coupling_f == 0.0 {
            return 0.0;
        }
        let angle = |second: f64| TAU * stage.frequency_hz * second;
        let at = |angle: f64| {
            let angle = angle.rem_euclid(TAU);
            sums.starts
                .iter()
                .min_by(|a, b| (a.0 - angle).abs().total_cmp(&(b.0 - angle).abs()))
                .map_or(0.0, |start| start.1)
        };
        let rising = at(TAU - 0.5 * angle(gate.rise_s));
        let falling = at(drive.width_rad - 0.5 * angle(gate.fall_s));
        let charge_c = stage.gate_coupling_f * (gate.swing_v - falling + rising);
        gate.swing_v * charge_c * stage.frequency_hz
    });
    let gate_w = gate_charge_w(stage);
    losses.driver = gate_w + rail_w - delivered_w;
    let driver_w = gate_w + rail_w;
    let residual_w = supply_w + driver_w - output_w - losses.total_w();
    // Where supply and driver work against each other, relative to what flows.
    let through_w = (supply_w + delivered_w)
        .max(output_w + losses.total_w() - losses.driver)
        .max(supply_w.abs());
    let energy_residual = residual_w / through_w;
    let harmonics = sums.harmonics.map(|integral| integral.norm());
    let mut harmonics_dbc = [0.0; HARMONICS - 1];
    for (level, harmonic) in harmonics_dbc.iter_mut().zip(&harmonics[1..]) {
        *level = 20.0 * (harmonic / harmonics[0]).log10();
    }
    let device = engine.device();
    let amps = |throw: Throw, v: f64| {
        let side = match device.corner() {
            Some(corner) if v < corner => Side::Below,
            _ => Side::Above,
        };
        device.current(throw, side, v).0 / load_ohm
    };
    let [closed_max, closed_min] = [sums.closed[0].v, sums.closed[1].v];
    let [open_max, open_min] = [sums.open[0].v, sums.open[1].v];
    Orbit {
        supply_v,
        drive: *drive,
        output_v,
        output_w,
        supply_a,
        supply_w,
        driver_w,
        efficiency: output_w / (supply_w + driver_w),
        losses,
        harmonics_dbc,
        switch_peak_v: closed_max.max(open_max),
        switch_min_v: closed_min.min(open_min),
        switch_peak_a: amps(Throw::Closed, closed_max),
        switch_min_a: amps(Throw::Closed, closed_min).min(amps(Throw::Open, open_min)),
        closing_v: end.v,
        closing_slope_v_per_s: slope * TAU * stage.frequency_hz,
        diode_conductions: sums.conductions,
        switches: Vec::new(),
        charge_residual: sums.charge[0].abs() / sums.charge[1],
        energy_residual,
    }
    .balanced()
}

/// What the gate itself costs, or both of a pair: its charge at the swing, each period.
pub fn gate_charge_w(stage: &Stage) -> f64 {
    stage.driver.gate.map_or(0.0, |gate| {
        let gates = if stage.is_pair() { 2.0 } else { 1.0 };
        gates * gate.charge_c * gate.swing_v * stage.frequency_hz
    })
}
