//! Class E closed forms from the literature against the solver with a nearly ideal stage.

use std::f64::consts::{PI, TAU};

use quietedge::orbit::{Drive, Network};
use quietedge::stage::{Anchor, Arm, Driver, Element, Feed, Load, Part, Rung, Stage, Switch};

/// A class E stage at 1 MHz and 1 V into 1 ohm: capacitance, excess reactance and feed in units of the load
/// resistance; loaded Q sets the series resonator.
fn stage(feed: Option<f64>, wrc: f64, excess: f64, q: f64, closed: f64) -> Stage {
    let w = TAU * 1e6;
    let part = |element| Part {
        element,
        loss_ohm: 0.0,
    };
    Stage {
        title: "ideal".into(),
        frequency_hz: 1e6,
        supply_v: 1.0,
        switch: Switch {
            closed_ohm: closed,
            open_ohm: f64::INFINITY,
        },
        drain_f: wrc / w,
        driver: Driver {
            duty: 0.5,
            anchor: Anchor::Centre,
        },
        feed: feed.map_or(Feed::Choke { ohm: 0.0 }, |x| Feed::Inductor {
            henry: x / w,
            ohm: 0.0,
        }),
        ladder: vec![Rung {
            arm: Arm::Series,
            parts: vec![
                part(Element::Inductor((q + excess) / w)),
                part(Element::Capacitor(1.0 / (w * q))),
            ],
        }],
        load: Load {
            ohm: 1.0,
            reactance: None,
        },
    }
}

#[test]
fn try_choke() {
    for q in [10.0, 100.0, 1000.0, 10000.0] {
        let g = 8.0 / (PI * PI + 4.0);
        let s = stage(
            None,
            8.0 / (PI * (PI * PI + 4.0)),
            PI * (PI * PI - 4.0) / 16.0,
            q,
            1e-6,
        );
        let net = Network::new(&s).unwrap();
        let o = net.orbit(1.0, &Drive::new(&s.driver, 0.5)).unwrap();
        println!("{q} {} {} {o:#?}", g, o.output_w);
    }
    panic!();
}
