//! Any stage, however silly, ends: with an orbit that balances, or with a reason. `PROPTEST_CASES=20000 cargo test
//! --release --test curved_properties` looks for longer.

use proptest::prelude::*;
use quietedge::map::{Control, Sweep};
use quietedge::orbit::{Drive, Network};
use quietedge::stage::Stage;

/// Numbers over so many decades around `middle`.
fn around(middle: f64, decades: f64) -> impl Strategy<Value = f64> {
    (-decades..decades).prop_map(move |power| middle * 10f64.powf(power))
}

fn maybe(text: impl Strategy<Value = String>) -> impl Strategy<Value = String> {
    prop_oneof![Just(String::new()), text]
}

fn device() -> impl Strategy<Value = (String, String, String)> {
    let diode = (0.0..5.0f64, around(0.3, 4.0))
        .prop_map(|(drop, ohm)| format!("diode = {{ drop = {drop}, resistance = {ohm} }}\n"));
    let knee = (around(2.0, 3.0), 2.0..20.0f64)
        .prop_map(|(amp, k)| format!("knee = {{ current = {amp}, sharpness = {k} }}\n"));
    let junction = (around(80e-12, 4.0), 0.05..10.0f64, 0.01..3.0f64).prop_map(|(c, phi, m)| {
        format!("junction = {{ zero_bias = {c}, potential = {phi}, grading = {m} }}\n")
    });
    let fixed = around(20e-12, 4.0).prop_map(|c| format!("capacitance = {c}\n"));
    let coupling = (
        around(2e-12, 3.0),
        around(3.0, 1.0),
        around(2e-10, 2.0),
        around(2e-10, 2.0),
    );
    let coupled = prop_oneof![
        Just((String::new(), String::new())),
        coupling.prop_map(|(c, swing, rise, fall)| (
            format!("gate_coupling = {c}\n"),
            format!("swing = {swing}\nrise = {rise}\nfall = {fall}\n")
        ))
    ];
    (maybe(diode), maybe(knee), maybe(junction), fixed, coupled).prop_map(
        |(diode, knee, junction, fixed, (coupling, gate))| {
            (diode + &knee, fixed + &junction + &coupling, gate)
        },
    )
}

fn ladder() -> impl Strategy<Value = String> {
    let part = prop_oneof![
        around(30e-9, 3.0).prop_map(|l| format!("inductance = {l}")),
        around(30e-12, 3.0).prop_map(|c| format!("capacitance = {c}")),
        (around(30e-9, 2.0), 1.0..500.0f64).prop_map(|(l, q)| format!("inductance = {l}, q = {q}")),
        (around(30e-9, 2.0), around(30e-12, 2.0))
            .prop_map(|(l, c)| format!("inductance = {l}, capacitance = {c}")),
    ];
    let arm = prop_oneof![Just("series"), Just("shunt")];
    let rung =
        (arm, part).prop_map(|(arm, part)| format!("[[load.ladder]]\n{arm} = {{ {part} }}\n"));
    prop::collection::vec(rung, 0..6).prop_map(|rungs| rungs.concat())
}

fn stage() -> impl Strategy<Value = String> {
    let feed = prop_oneof![
        Just("choke = true\n".to_owned()),
        around(10e-9, 3.0).prop_map(|l| format!("inductance = {l}\n"))
    ];
    (
        around(6.0, 2.0),
        around(0.2, 5.0),
        device(),
        0.01..0.99f64,
        feed,
        around(10.0, 3.0),
        ladder(),
    )
        .prop_map(|(supply, closed, (switch, drain, driver), duty, feed, load, ladder)| {
            format!(
                "frequency = \"169.4 MHz\"\nsupply = {{ voltage = {supply} }}\n[switch]\nclosed_resistance = {closed}\n\
                 {switch}[drain]\n{drain}[driver]\nduty = {duty}\n{driver}[feed]\n{feed}resistance = 0.05\n[load]\n\
                 resistance = {load}\n{ladder}"
            )
        })
}

/// Found by the search: a step after the diode's corner was shorter than the finest fraction of its segment.
const SHORTEST_STEP: &str = r#"
frequency = "169.4 MHz"
supply = { voltage = 26.320613886791627 }
switch = { closed_resistance = 0.005595631578712327, diode = { drop = 4.093879833365655, resistance = 0.3 } }
driver = { duty = 0.29659521403892947, swing = 3, rise = 0.0000000009300159548361479, fall = 0.0000000002 }
feed = { inductance = 0.00000001, resistance = 0.05 }
[drain]
capacitance = 0.00000000002
junction = { zero_bias = 0.0000003784997262944971, potential = 0.2766678912017115, grading = 2.129449934311377 }
gate_coupling = 0.000000000002
[load]
resistance = 6.925869994737929
[[load.ladder]]
series = { inductance = 0.00000003, q = 143.88517413495987 }
[[load.ladder]]
series = { inductance = 0.0000015994435491668928 }
"#;

/// Found by the search: a drain that a shunt inductor holds at ground, so that its peak is rounding and was below its
/// lowest voltage.
const FLAT_DRAIN: &str = r#"
frequency = "169.4 MHz"
supply = { voltage = 89.74860150598482 }
switch = { closed_resistance = 2221.20896489888 }
driver = { duty = 0.9828099296907163 }
feed = { choke = true, resistance = 0.05 }
[drain]
capacitance = 0.00000000019352410545417528
junction = { zero_bias = 0.000000016239911488079416, potential = 6.8782321815322875, grading = 1.5138321328433646 }
[load]
resistance = 338.742587349214
[[load.ladder]]
shunt = { inductance = 0.0000007225664346823822 }
[[load.ladder]]
shunt = { inductance = 0.00000002190524286563965 }
[[load.ladder]]
shunt = { capacitance = 0.00000000002273884032963809 }
"#;

#[test]
fn what_the_search_found_ends() {
    for text in [SHORTEST_STEP, FLAT_DRAIN] {
        let stage = Stage::parse("found", text).unwrap();
        let network = Network::new(&stage).unwrap();
        let drive = Drive::new(&stage.driver, stage.driver.duty);
        if let Ok(orbit) = network.orbit(stage.supply_v, &drive) {
            assert!(orbit.energy_residual.abs() <= 1e-6);
            assert!(orbit.switch_peak_v >= orbit.switch_min_v);
        }
    }
}

proptest! {
    #![proptest_config(ProptestConfig { failure_persistence: None, ..ProptestConfig::with_cases(
        std::env::var("PROPTEST_CASES").ok().and_then(|text| text.parse().ok()).unwrap_or(12)
    ) })]

    #[test]
    fn any_stage_ends_with_an_orbit_or_a_reason(text in stage()) {
        let stage = Stage::parse("any", &text).map_err(|p| TestCaseError::fail(p.to_string()))?;
        let Ok(network) = Network::new(&stage) else { return Ok(()) };
        let drive = Drive::new(&stage.driver, stage.driver.duty);
        match network.orbit(stage.supply_v, &drive) {
            Ok(orbit) => {
                prop_assert!(orbit.energy_residual.abs() <= 1e-6);
                prop_assert!(orbit.output_w.is_finite() && orbit.switch_peak_v >= orbit.switch_min_v);
                prop_assert!(orbit.losses.diode >= 0.0 && orbit.losses.closed_switch >= 0.0);
            }
            Err(reason) => prop_assert!(!reason.to_string().is_empty()),
        }
        // A map ends as well, whatever its points do.
        if let Ok(sweep) = Sweep::full(&network, Control::Supply, 3) {
            let _ = sweep.solve(&network);
        }
    }

    #[test]
    fn any_text_is_read_or_refused(text in "\\PC{0,300}") {
        let _ = Stage::parse("any", &text);
    }

    #[test]
    fn a_spoilt_stage_is_read_or_refused(text in stage(), at in 0usize..2000, with in "[a-z0-9.=\"{}\\[\\]\\-]{0,4}") {
        let mut spoilt: Vec<char> = text.chars().collect();
        let at = at % spoilt.len();
        spoilt.splice(at..(at + 1).min(spoilt.len()), with.chars());
        let spoilt: String = spoilt.into_iter().collect();
        if let Ok(stage) = Stage::parse("spoilt", &spoilt) {
            // A stage that still reads can be asked for a network, and no more is promised.
            let _ = Network::new(&stage);
        }
    }
}
