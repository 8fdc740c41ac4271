use super::*;
use crate::input::{Document, Files, ReadSeek};

/// One file in memory.
struct One(&'static str);

impl Files for One {
    fn open(&self, name: &str) -> std::io::Result<Box<dyn ReadSeek>> {
        if name == "my.limits.toml" {
            Ok(Box::new(std::io::Cursor::new(self.0)))
        } else {
            Err(std::io::ErrorKind::NotFound.into())
        }
    }
}

const OWN: &str = r#"
[set.yard_radio]
kind = "mask"
reference = "mean_power"
bw_hz = "1 kHz"
[[set.yard_radio.segment]]
from_hz = "10 kHz"
term = [{ form = "const", db = -40 }]
"#;

fn request(text: &str) -> Result<Limits, String> {
    let document = Document::parse("study.toml", text).map_err(|e| e.to_string())?;
    LimitsRequest::read(&document.root(), &One(OWN)).map_err(|e| e.to_string())
}

fn mask(name: &str) -> Mask {
    let library = Library::published().unwrap();
    match &library.find(name).unwrap().kind {
        Kind::Mask(mask) => mask.clone(),
        other => panic!("{name} is {}", other.word()),
    }
}

#[test]
fn every_published_set_reproduces_its_check_points() {
    let library = Library::published().unwrap();
    assert_eq!(library.sets().len(), 34);
    let mut held = 0;
    for set in library.sets() {
        let Kind::Mask(mask) = &set.kind else {
            continue;
        };
        for check in &set.checks {
            let conditions = Conditions {
                authorized_bandwidth_hz: check.authorized_bandwidth_hz,
                ..Conditions::default()
            };
            let level = mask.limit_at(check.offset_hz, check.power_w, &conditions);
            let Ok(Some(LimitLevel::Relative { db })) = level else {
                panic!("{} at {} Hz: {level:?}", set.name, check.offset_hz);
            };
            // The collected values carry three decimals at most.
            assert!(
                (db - check.limit_db).abs() <= 0.000_501,
                "{} at {} Hz: {db}, printed {}",
                set.name,
                check.offset_hz,
                check.limit_db
            );
            held += 1;
        }
    }
    // 4 + 6 + 6 + 6 + 3 + 4 + 4 rows of part 90, 8 of 73.44, 5 of 802.11.
    assert_eq!(held, 46);
}

#[test]
fn power_terms_follow_the_power() {
    let at = |power_w| mask("fcc_90_210_mask_d").limit_at(20e3, power_w, &Conditions::default());
    // 50 + 10 log10(5) = 56.9897.
    let Ok(Some(LimitLevel::Relative { db })) = at(Some(5.0)) else {
        panic!("mask D at 5 W");
    };
    assert!((db + 56.989_700_043_36).abs() < 1e-9, "{db}");
    assert_eq!(at(None), Err(NotStated::Power));
}

#[test]
fn rows_by_power_and_class_pick_one() {
    let am = mask("fcc_73_44_am");
    let segments = |power_w| {
        let conditions = Conditions {
            power_w: Some(power_w),
            ..Conditions::default()
        };
        let chosen = am.segments_for(None, &conditions).unwrap();
        chosen.iter().map(|(index, _)| *index).collect::<Vec<_>>()
    };
    assert_eq!(segments(100.0), [0, 1, 2, 3, 5]);
    assert_eq!(segments(158.0), [0, 1, 2, 3, 4]);
    assert_eq!(segments(1000.0), [0, 1, 2, 3, 4]);
}

#[test]
fn both_and_floor() {
    let Ok(Some(level)) = mask("ieee802154_2450_psd").limit_at(4e6, None, &Conditions::default())
    else {
        panic!("no level");
    };
    assert_eq!(
        level,
        LimitLevel::Both {
            db: -20.0,
            dbm: -30.0
        }
    );
    assert_eq!(level.dbm(0.0), -30.0);
    assert_eq!(level.dbm(-15.0), -35.0);
}

#[test]
fn offsets_hold_at_the_upper_end() {
    let b = mask("fcc_90_210_mask_b");
    let at = |offset_hz| {
        b.limit_at(
            offset_hz,
            Some(1.0),
            &Conditions {
                authorized_bandwidth_hz: Some(20e3),
                ..Conditions::default()
            },
        )
    };
    assert_eq!(at(10e3), Ok(None));
    assert_eq!(at(10.001e3), Ok(Some(LimitLevel::Relative { db: -25.0 })));
    assert_eq!(at(50e3), Ok(Some(LimitLevel::Relative { db: -35.0 })));
    assert_eq!(at(50.001e3), Ok(Some(LimitLevel::Relative { db: -43.0 })));
    assert_eq!(
        b.limit_at(15e3, None, &Conditions::default()),
        Err(NotStated::AuthorizedBandwidth)
    );
}

#[test]
fn request_reads_what_the_study_states() {
    let limits = request(
        r#"
        sets = ["tetra_acp_below_700mhz", "yard_radio"]
        files = ["my.limits.toml"]
        class = "class_4"
        evm_percent = "10 %"
        evm_peak_percent = 30
        [[acpr]]
        offset = "25 kHz"
        symbol_rate = "18 kHz"
        rolloff = 0.35
        limit = "-60 dB"
        "#,
    )
    .unwrap();
    assert_eq!(limits.sets.len(), 2);
    assert_eq!(limits.sets[1].provenance.obtained, Obtained::Own);
    assert_eq!(limits.class_for(&limits.sets[0]), Some("class_4"));
    assert_eq!(limits.evm_percent, Some(10.0));
    assert_eq!(limits.acpr[0].main, limits.acpr[0].filter);
    assert_eq!(
        request("files = [\"my.limits.toml\"]").unwrap().sets.len(),
        1
    );
}

#[test]
fn request_names_what_is_missing_or_wrong() {
    for (text, expected) in [
        (
            r#"sets = ["fcc_90_210_mask_q"]"#,
            "did you mean \"fcc_90_210_mask_",
        ),
        (r#"sets = ["fcc_90_210_mask_b"]"#, "authorized_bandwidth"),
        (r#"sets = ["lte_ue_aclr"]"#, "1.4 MHz, 3 MHz, 5 MHz"),
        (
            "sets = [\"lte_ue_aclr\"]\nchannel = \"7 MHz\"",
            "given \"7 MHz\"",
        ),
        (
            "sets = [\"lte_ue_sem_5mhz\"]\nchannel = \"10 MHz\"",
            "5 MHz, for which",
        ),
        (
            "sets = [\"edge_evm\"]\nclass = \"mobil\"",
            "did you mean \"mobile\"",
        ),
        (
            "sets = [\"ieee80211_ofdm_rce\"]\nmodulation = \"256-QAM\"",
            "\"64-QAM\"",
        ),
        (r#"files = ["other.toml"]"#, "other.toml"),
        (
            "[[acpr]]\noffset = 1\nbandwidth = 1\nlimit = \"40 dB\"",
            "given \"40 dB\"",
        ),
        ("evm_percnt = 3", "did you mean \"evm_percent\""),
    ] {
        let message = request(text).unwrap_err();
        assert!(message.contains(expected), "{text}: {message}");
    }
}

#[test]
fn cautions_say_how_numbers_were_obtained() {
    let library = Library::published().unwrap();
    let caution = |name: &str| library.find(name).unwrap().provenance.caution();
    assert!(
        caution("tetra_acp_above_700mhz")
            .unwrap()
            .contains("memory, of medium")
    );
    assert!(
        caution("ieee80211_ofdm_rce")
            .unwrap()
            .contains("second-hand")
    );
    assert!(
        caution("fcc_90_210_mask_d")
            .unwrap()
            .contains("authorized_bandwidth_hz")
    );
    assert_eq!(caution("fcc_90_210_mask_a"), None);
}

proptest::proptest! {
    /// A published set with one line lost, doubled or spoilt is read or refused with a place; it
    /// never stops the program.
    #[test]
    fn spoilt_files_are_read_or_refused(at in 0usize..1400, how in 0u8..4) {
        let text = include_str!("published.toml");
        let mut lines: Vec<String> = text.lines().map(str::to_owned).collect();
        let line = lines[at].clone();
        match how {
            0 => drop(lines.remove(at)),
            1 => lines.insert(at, line),
            2 => lines[at] = line.replace("= ", "= -"),
            _ => lines[at] = line.replace("0.0", "1e308"),
        }
        if let Err(problem) = read_sets("spoilt.toml", &lines.join("\n")) {
            let message = problem.to_string();
            proptest::prop_assert!(message.starts_with("spoilt.toml:"), "{}", message);
        }
    }
}
