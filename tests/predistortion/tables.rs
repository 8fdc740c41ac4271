//! Entries of tables against inverses known in closed form, and what cannot be inverted.

use num_complex::Complex64;
use quietedge::drive::{Between, LookupSize, Shape, Shaping, Spacing};
use quietedge::map::Map;
use quietedge::predistort::{BelowFloor, EntryCounts, EntryState, Table, TableRequest};

use super::map_of;

const FULL_V: f64 = 8.0;

fn shaping(floor: f64) -> Shaping {
    Shaping {
        shape: Shape::Exponential,
        floor,
    }
}

fn request(depth: usize, amplitude_bits: u32, phase_bits: u32) -> TableRequest {
    TableRequest {
        size: LookupSize {
            depth,
            address_bits: 16,
            amplitude_bits,
            phase_bits,
        },
        ..TableRequest::default()
    }
}

fn table(map: &Map, floor: f64, request: &TableRequest) -> Table {
    Table::from_map("test", map, FULL_V, &shaping(floor), request).expect("a table")
}

/// `a = 20 (1.3 u - 0.3 u^2)`, phase `0.4 u^2` rad. Inverse: `u = (1.3 - sqrt(1.69 - 1.2 a / 20)) / 0.6`.
fn bent(u: f64) -> Complex64 {
    Complex64::from_polar(20.0 * (1.3 * u - 0.3 * u * u), 0.4 * u * u)
}

#[test]
fn every_entry_is_within_half_a_step_of_the_exact_inverse() {
    // Half a step, and what the map's interpolation is off through 4001 points: less than 1e-9 of full output (checked
    // below), which the inverse magnifies by 1 / 0.7 at most; at zero output the phase is that of the first point,
    // 0.4 / 4000^2 = 2.5e-8 rad. Rounding itself adds nothing.
    let map = map_of(FULL_V, 4001, bent);
    for step in 0..999 {
        let u = (f64::from(step) + 0.37) / 999.0;
        let got = map.output_v(u * FULL_V).expect("inside");
        assert!((got - bent(u)).norm() < 20e-9, "{u}: {got}");
    }
    let laws = [
        Spacing::Magnitude,
        Spacing::Power,
        Spacing::Companded { mu: 100.0 },
    ];
    for spacing in laws {
        for (depth, amplitude_bits, phase_bits) in [(64, 8, 8), (1000, 12, 10), (4096, 16, 16)] {
            let request = TableRequest {
                spacing,
                ..request(depth, amplitude_bits, phase_bits)
            };
            let table = table(&map, 0.0, &request);
            let top = f64::from((1u32 << amplitude_bits) - 1);
            let turn = f64::from(1u32 << phase_bits) / std::f64::consts::TAU;
            for (index, word) in table.lookup.words().iter().enumerate() {
                let p = index as f64 / (depth - 1) as f64;
                let m = match spacing {
                    Spacing::Magnitude => p,
                    Spacing::Power => p.sqrt(),
                    Spacing::Companded { mu } => ((1.0 + mu).powf(p) - 1.0) / mu,
                };
                let u = (1.3 - (1.69 - 1.2 * m).max(0.0).sqrt()) / 0.6;
                assert!(
                    (f64::from(word.control) - u * top).abs() <= 0.5 + 1.5e-9 * top,
                    "{index}: {word:?} {u}"
                );
                let phase = 0.4 * (1.0 - u * u);
                assert!(
                    (f64::from(word.phase) - phase * turn).abs() <= 0.5 + 3e-8 * turn,
                    "{index}: {word:?}"
                );
            }
            assert_eq!(table.counts().inverted, depth);
        }
    }
}

#[test]
fn a_straight_stage_has_the_identity_for_a_table_bit_for_bit() {
    for bits in [4, 8, 12] {
        let depth = 1usize << bits;
        let map = map_of(FULL_V, 201, |u| Complex64::from_polar(17.3 * u, -1.2));
        let request = TableRequest {
            between: Between::Nearest,
            size: LookupSize {
                depth,
                address_bits: bits,
                amplitude_bits: bits,
                phase_bits: 10,
            },
            ..TableRequest::default()
        };
        let table = table(&map, 0.0, &request);
        for (index, word) in table.lookup.words().iter().enumerate() {
            assert_eq!((word.control, word.phase), (index as u32, 0));
            let through = table.lookup.word(index as f64 / (depth - 1) as f64);
            assert_eq!(through, *word);
        }
    }
}

#[test]
fn a_solved_stage_without_curvature_has_the_identity_for_a_table() {
    let text = include_str!("../../signals/tide-gauge.stage.toml");
    let stage = quietedge::stage::Stage::parse("tide gauge", text).expect("a stage");
    let network = quietedge::orbit::Network::new(&stage).expect("a network");
    let sweep = quietedge::map::Sweep::full(&network, quietedge::map::Control::Supply, 21);
    let map = sweep.expect("a sweep").solve(&network).expect("a map");
    let request = TableRequest {
        between: Between::Nearest,
        size: LookupSize {
            depth: 256,
            address_bits: 8,
            amplitude_bits: 8,
            phase_bits: 12,
        },
        ..TableRequest::default()
    };
    let table = Table::from_map("tide gauge", &map, stage.supply_v, &shaping(0.0), &request);
    for (index, word) in table.expect("a table").lookup.words().iter().enumerate() {
        assert_eq!((word.control, word.phase), (index as u32, 0));
    }
}

#[test]
fn a_floor_is_followed_or_held() {
    let map = map_of(FULL_V, 4001, bent);
    let held = table(
        &map,
        0.1,
        &TableRequest {
            below_floor: BelowFloor::Held,
            ..request(101, 12, 12)
        },
    );
    // Output at the floor: 1.3 * 0.1 - 0.3 * 0.01 = 0.127 of full: entries 0 to 12 want less.
    assert_eq!(
        held.counts(),
        EntryCounts {
            inverted: 88,
            held_at_floor: 13,
            ..Default::default()
        }
    );
    for entry in &held.entries {
        assert!(entry.control >= 0.1 - 1e-12);
    }
    let shaped = table(&map, 0.1, &request(101, 12, 12));
    assert!((shaped.entries[0].control - 0.1).abs() < 1e-9);
    let controls: Vec<f64> = shaped.entries.iter().map(|entry| entry.control).collect();
    assert!(controls.windows(2).all(|pair| pair[0] <= pair[1]));
    // The output follows the shaping with the floor's own output: m + f exp(-m / f), f = 0.127.
    for entry in &shaped.entries[..100] {
        let wanted = entry.magnitude + 0.127 * (-entry.magnitude / 0.127).exp();
        let output = bent(entry.control).norm() / 20.0;
        assert!(
            (output - wanted.min(1.0)).abs() < 1e-8,
            "{entry:?} {output} {wanted}"
        );
    }
    assert!(shaped.counts().moved_by_floor > 50);
}

#[test]
fn saturation_turns_and_gaps_are_held_counted_and_said() {
    // Rises to 20 V at 0.8, then falls; below 0.1 it falls towards the leak's null first.
    let turning = map_of(FULL_V, 801, |u| {
        let rise = 20.0 * (1.0 - ((u - 0.8) / 0.8).powi(2));
        Complex64::from(if u < 0.1 {
            4.7 + 40.0 * (0.1 - u)
        } else {
            rise
        })
    });
    assert!(turning.inverse(10.0).is_none());
    let table = table(&turning, 0.0, &request(101, 12, 12));
    // At 0.1: 20 (1 - (7/8)^2) = 4.6875 V, the lowest that rises: entries below 0.234375 are held.
    assert_eq!(
        table.counts(),
        EntryCounts {
            inverted: 77,
            held_at_bottom: 24,
            ..Default::default()
        }
    );
    for entry in &table.entries {
        assert!(
            (0.1 - 1e-9..=0.8 + 1e-9).contains(&entry.control),
            "{entry:?}"
        );
        if entry.state == EntryState::Inverted {
            let output = 1.0 - ((entry.control - 0.8) / 0.8).powi(2);
            assert!((output - entry.magnitude).abs() < 1e-6, "{entry:?}");
        }
    }

    // More output than there is: 25 V asked of a stage that gives 20.
    let map = map_of(FULL_V, 4001, bent);
    let beyond = TableRequest {
        full_output_v: Some(25.0),
        ..request(101, 12, 12)
    };
    let table = super::tables::table(&map, 0.0, &beyond);
    assert_eq!(
        table.counts(),
        EntryCounts {
            inverted: 81,
            held_at_top: 20,
            ..Default::default()
        }
    );
    assert!(table.entries[81..].iter().all(|entry| entry.control == 1.0));
}

#[test]
fn a_gap_of_the_map_is_counted() {
    let map = map_of(FULL_V, 101, bent);
    let points = map.points().iter().enumerate();
    let kept = points
        .filter(|(index, _)| !(41..60).contains(index))
        .map(|(_, point)| point.clone());
    let gappy = Map::new(map.control(), map.origin(), 100e6, 50.0, kept.collect()).expect("a map");
    let table = table(&gappy, 0.0, &request(201, 12, 12));
    let expected = table
        .entries
        .iter()
        .filter(|entry| entry.control > 0.4 && entry.control < 0.6)
        .count();
    assert!(expected > 30);
    assert_eq!(table.counts().in_gap, expected);
}

#[test]
fn a_map_that_never_rises_is_refused() {
    let map = map_of(FULL_V, 11, |u| Complex64::from(10.0 - u));
    let error = Table::from_map(
        "falls",
        &map,
        FULL_V,
        &shaping(0.0),
        &TableRequest::default(),
    );
    assert!(
        error
            .expect_err("no inverse")
            .to_string()
            .contains("no rising branch")
    );
}
