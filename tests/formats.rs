//! The examples of `docs/formats.md` are read by the code that reads users' files.

use std::io::{self, Cursor};

use quietedge::input::{Document, Files, ReadSeek};
use quietedge::map::{MapFacts, MapFormat, read_map};
use quietedge::signal::FormatOptions;
use quietedge::stage::Stage;
use quietedge::study::{Hardware, Study};

const PAGE: &str = include_str!("../docs/formats.md");

/// The blocks of `language`, in order.
fn blocks(language: &str) -> Vec<String> {
    PAGE.split(&format!("```{language}\n"))
        .skip(1)
        .map(|rest| rest.split("```").next().unwrap().to_owned())
        .collect()
}

/// The page's own stage and map beside one of its studies.
struct Page(String);

impl Files for Page {
    fn open(&self, name: &str) -> io::Result<Box<dyn ReadSeek>> {
        let text = match name {
            "study" => self.0.clone(),
            "tide-gauge.stage.toml" => blocks("toml")[0].clone(),
            "measured.csv" => blocks("csv")[0].clone(),
            _ => return Err(io::ErrorKind::NotFound.into()),
        };
        Ok(Box::new(Cursor::new(text.into_bytes())))
    }
}

#[test]
fn the_stage_is_read() {
    let stage = Stage::parse("formats.md", &blocks("toml")[0]).unwrap();
    assert_eq!(stage.frequency_hz, 169.4e6);
    assert_eq!(stage.ladder.len(), 4);
}

#[test]
fn the_studies_are_read() {
    let toml = blocks("toml");
    let study = Study::read("study", &Page(toml[1].clone())).unwrap();
    assert_eq!(study.limits.evm_percent, Some(10.0));
    assert_eq!(study.resolution_hz, Some(50.0));
    let study = Study::read("study", &Page(toml[2].clone())).unwrap();
    assert_eq!(study.signal.level, 0.8);
    assert!(matches!(study.hardware, Hardware::Map(_)));
}

#[test]
fn the_sidecar_is_read() {
    let toml = blocks("toml");
    assert_eq!(toml.len(), 4, "a block that no test reads");
    let document = Document::parse("formats.md", &toml[3]).unwrap();
    let section = document.root();
    let options = FormatOptions::from_section(&section).unwrap();
    section.finish().unwrap();
    assert_eq!(options.rate_hz, Some(1.024e6));
}

#[test]
fn the_map_is_read() {
    let text = &blocks("csv")[0];
    let map = read_map(
        "formats.md",
        MapFormat::Csv,
        text.as_bytes(),
        &MapFacts::default(),
    )
    .unwrap();
    assert_eq!(map.points().len(), 3);
    assert_eq!(map.load_ohm(), 50.0);
}
