//! Spoilt files of every kind: whatever stands in a stage, study or map, reading it ends in a value or
//! in a complaint with a place, never in a panic or a hang; a stage that can be read is solved or refused.

use std::io::{self, Cursor};

use proptest::prelude::*;
use quietedge::input::{Files, Problem, ReadSeek};
use quietedge::map::{MapFacts, MapFormat, read_map};
use quietedge::orbit::{Drive, Network};
use quietedge::stage::Stage;
use quietedge::study::Study;

const STAGE: &str = include_str!("../signals/tide-gauge.stage.toml");
const STUDY: &str = include_str!("../signals/robot-link.study.toml");
const MAP: &str = "# control = supply\n# frequency = 100 MHz\n# load_resistance = 50 ohm\ncontrol,amplitude_v,phase_deg,supply_a\n0,0.1,10,0\n3,10,12,0.5\n6,20,14,1\n";

/// What values are replaced with: ends of ranges, wrong kinds, wrong units.
const VALUES: [&str; 28] = [
    "0",
    "-1",
    "1",
    "1.0",
    "0.99",
    "1e300",
    "1e-300",
    "1e15",
    "1e-15",
    "nan",
    "inf",
    "-inf",
    "\"\"",
    "\"-3 dB\"",
    "\"1 Tohm\"",
    "\"1 nohm\"",
    "\"1 pF\"",
    "\"1 F\"",
    "\"1 fH\"",
    "\"1 kH\"",
    "\"1 Hz\"",
    "\"1 THz\"",
    "true",
    "[]",
    "{}",
    "[[1]]",
    "{ inductance = 1e-9 }",
    "9223372036854775808",
];

/// One way to spoil a text.
#[derive(Debug, Clone)]
enum Spoil {
    /// The value of one line's last key.
    Value(usize, usize),
    /// A line again, elsewhere.
    Repeat(usize, usize),
    /// A line left out.
    Drop(usize),
    /// A character put in.
    Insert(usize, char),
    /// The rest cut off.
    Cut(usize),
}

fn spoil() -> impl Strategy<Value = Spoil> {
    let any = 0..10_000usize;
    prop_oneof![
        4 => (any.clone(), 0..VALUES.len()).prop_map(|(line, value)| Spoil::Value(line, value)),
        1 => (any.clone(), any.clone()).prop_map(|(from, to)| Spoil::Repeat(from, to)),
        1 => any.clone().prop_map(Spoil::Drop),
        1 => (any.clone(), any_character()).prop_map(|(at, c)| Spoil::Insert(at, c)),
        1 => any.prop_map(Spoil::Cut),
    ]
}

fn any_character() -> impl Strategy<Value = char> {
    prop_oneof![
        proptest::sample::select(
            "0123456789.,-+eE\"'[]{}=#\n\\ \u{0}\u{b5}"
                .chars()
                .collect::<Vec<_>>()
        ),
        any::<char>(),
    ]
}

fn spoilt(text: &str, spoils: &[Spoil]) -> String {
    let mut text = text.to_owned();
    for spoil in spoils {
        let mut lines: Vec<String> = text.lines().map(str::to_owned).collect();
        if lines.is_empty() {
            return text;
        }
        let count = lines.len();
        match *spoil {
            Spoil::Value(line, value) => {
                let line = &mut lines[line % count];
                // The innermost value, so that inline tables are spoilt inside.
                if let Some(at) = line.rfind('=') {
                    let tail: String = line[at..].chars().filter(|c| *c == '}').collect();
                    *line = format!("{}= {} {tail}", &line[..at], VALUES[value]);
                }
            }
            Spoil::Repeat(from, to) => {
                let line = lines[from % count].clone();
                lines.insert(to % (count + 1), line);
            }
            Spoil::Drop(line) => {
                lines.remove(line % count);
            }
            Spoil::Insert(at, c) => {
                let line = &mut lines[at % count];
                let places: Vec<usize> = line.char_indices().map(|(at, _)| at).collect();
                let place = places.get(at / count % (places.len() + 1)).copied();
                line.insert(place.unwrap_or(line.len()), c);
            }
            Spoil::Cut(at) => {
                let line = at % count;
                lines.truncate(line + 1);
                let keep = lines[line].chars().count() / 2;
                lines[line] = lines[line].chars().take(keep).collect();
            }
        }
        text = lines.join("\n");
    }
    text
}

/// Every complaint can be shown, and its place lies in the text.
fn shown(problem: &Problem, text: &str) {
    let message = problem.to_string();
    assert!(
        message.contains("given ") && message.contains("; allowed: "),
        "{message}"
    );
    if let Some(place) = &problem.parts().place {
        assert!(
            place.line >= 1 && place.line <= text.split('\n').count().max(1),
            "{message}"
        );
        assert!(place.column >= 1);
    }
}

/// The study under test beside a good stage.
struct Memory(String);

impl Files for Memory {
    fn open(&self, name: &str) -> io::Result<Box<dyn ReadSeek>> {
        let bytes = match name {
            "study" => self.0.clone().into_bytes(),
            "robot-link.stage.toml" => STAGE.as_bytes().to_vec(),
            _ => return Err(io::ErrorKind::NotFound.into()),
        };
        Ok(Box::new(Cursor::new(bytes)))
    }
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 512, failure_persistence: None, ..ProptestConfig::default() })]

    #[test]
    fn stages_end_in_an_orbit_or_a_complaint(spoils in prop::collection::vec(spoil(), 1..4)) {
        let text = spoilt(STAGE, &spoils);
        match Stage::parse("stage", &text) {
            Err(problem) => shown(&problem, &text),
            Ok(stage) => {
                let drive = Drive::new(&stage.driver, stage.driver.duty);
                if let Ok(network) = Network::new(&stage) {
                    match network.orbit(stage.supply_v, &drive) {
                        Ok(orbit) => prop_assert!(
                            orbit.output_w.is_finite() && orbit.energy_residual.abs() < 1e-6,
                            "{text}"
                        ),
                        Err(error) => prop_assert!(!error.to_string().is_empty()),
                    }
                }
            }
        }
    }

    #[test]
    fn studies_end_in_a_study_or_a_complaint(spoils in prop::collection::vec(spoil(), 1..4)) {
        let text = spoilt(STUDY, &spoils);
        if let Err(problem) = Study::read("study", &Memory(text.clone())) {
            shown(&problem, &text);
        }
    }

    #[test]
    fn maps_end_in_a_map_or_a_complaint(spoils in prop::collection::vec(spoil(), 1..4)) {
        let text = spoilt(MAP, &spoils);
        for format in [MapFormat::Csv, MapFormat::Json] {
            match read_map("map", format, text.as_bytes(), &MapFacts::default()) {
                Err(problem) => shown(&problem, &text),
                Ok(map) => {
                    let (low, high) = map.domain();
                    let middle = map.output_v(0.5 * (low + high));
                    prop_assert!(middle.is_some_and(|v| v.re.is_finite() && v.im.is_finite()), "{text}");
                }
            }
        }
    }

    #[test]
    fn any_text_at_all_is_refused_in_peace(text in "\\PC{0,200}") {
        for problem in [
            Stage::parse("stage", &text).err(),
            Study::read("study", &Memory(text.clone())).err(),
            read_map("map", MapFormat::Csv, text.as_bytes(), &MapFacts::default()).err(),
            read_map("map", MapFormat::Json, text.as_bytes(), &MapFacts::default()).err(),
        ] {
            prop_assert!(problem.is_some());
            shown(&problem.unwrap(), &text);
        }
    }
}
