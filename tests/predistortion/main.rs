//! Predistortion from the outside: tables against closed forms, files read back, polynomials against NumPy.

mod closed;
mod command;
mod exports;
mod laws;
mod polynomials;
mod tables;
mod verified;

use std::collections::BTreeMap;
use std::io::{self, Cursor};

use num_complex::Complex64;
use quietedge::input::{Files, ReadSeek};
use quietedge::map::{Control, Map, MapPoint, Origin};

/// Files in memory.
#[derive(Debug, Default)]
pub struct Memory(pub BTreeMap<String, Vec<u8>>);

impl Files for Memory {
    fn open(&self, name: &str) -> io::Result<Box<dyn ReadSeek>> {
        let bytes = self.0.get(name).ok_or(io::ErrorKind::NotFound)?;
        Ok(Box::new(Cursor::new(bytes.clone())))
    }
}

/// A map of `full_v` through `count` points of `output`, a function of the supply's fraction.
pub fn map_of(full_v: f64, count: usize, output: impl Fn(f64) -> Complex64) -> Map {
    let points = (0..count)
        .map(|index| {
            let part = index as f64 / (count - 1) as f64;
            MapPoint {
                control: part * full_v,
                output_v: output(part),
                supply_v: part * full_v,
                supply_a: None,
                driver_w: None,
                efficiency: None,
                switch_peak_v: None,
                switch_peak_a: None,
                switch_min_v: None,
                closing_v: None,
            }
        })
        .collect();
    Map::new(Control::Supply, Origin::File, 100e6, 50.0, points).expect("a map")
}

/// The same map as a file.
pub fn map_text(map: &Map) -> Vec<u8> {
    let mut text =
        "# control = supply\n# frequency = 100 MHz\n# load_resistance = 50 ohm\ncontrol,output_re_v,output_im_v\n".to_owned();
    for point in map.points() {
        text.push_str(&format!(
            "{},{},{}\n",
            point.control, point.output_v.re, point.output_v.im
        ));
    }
    text.into_bytes()
}
