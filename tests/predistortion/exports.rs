//! Every export read back, equal bit for bit.

use std::io::Write;
use std::process::Command;

use quietedge::drive::{Between, Lookup, LookupSize, Spacing, Word};
use quietedge::predistort::{Table, c_header, csv, hex_image, json, npy, read_table};

/// A table with every sort of word: the lowest, the highest, negative phases, odd widths.
fn tables() -> Vec<Table> {
    let cases = [
        (5, 3, 3, 5, Spacing::Magnitude, Between::Nearest),
        (300, 14, 12, 9, Spacing::Power, Between::Linear),
        (
            64,
            8,
            16,
            16,
            Spacing::Companded { mu: 255.0 },
            Between::Linear,
        ),
        (
            33,
            24,
            24,
            24,
            Spacing::Companded { mu: 10.5 },
            Between::Nearest,
        ),
    ];
    cases
        .iter()
        .map(
            |&(depth, address_bits, amplitude_bits, phase_bits, spacing, between)| {
                let size = LookupSize {
                    depth,
                    address_bits,
                    amplitude_bits,
                    phase_bits,
                };
                let (top, half) = (u64::from(size.top_word()), 1i64 << (phase_bits - 1));
                let words = (0..depth as u64)
                    .map(|k| Word {
                        control: (k * top / (depth as u64 - 1)) as u32,
                        phase: ((k as i64 * 2_654_435_761).rem_euclid(2 * half) - half) as i32,
                    })
                    .collect();
                Table {
                    lookup: Lookup::new(size, spacing, between, 16, words).expect("a table"),
                    entries: Vec::new(),
                    full_control: 6.0,
                    control: quietedge::map::Control::Supply,
                    passes: Vec::new(),
                    full_output_v: Some(0.1 + 0.2),
                    title: "odd */ title\nwith a break".to_owned(),
                }
            },
        )
        .collect()
}

fn words(table: &Table) -> Vec<(u32, i32)> {
    table
        .lookup
        .words()
        .iter()
        .map(|word| (word.control, word.phase))
        .collect()
}

#[test]
fn json_is_read_back_whole() {
    for table in tables() {
        let bytes = serde_json::to_vec_pretty(&json(&table)).expect("JSON");
        assert_eq!(
            read_table("table.json", &bytes[..]).expect("a table"),
            table
        );
    }
}

#[test]
fn csv_and_npy_hold_the_words() {
    for table in tables() {
        let text = csv(&table);
        let mut reader = csv::ReaderBuilder::new()
            .comment(Some(b'#'))
            .from_reader(text.as_bytes());
        let rows: Vec<csv::StringRecord> =
            reader.records().collect::<Result<_, _>>().expect("rows");
        let read: Vec<(u32, i32)> = rows
            .iter()
            .map(|row| {
                (
                    row[2].parse().expect("a word"),
                    row[3].parse().expect("a word"),
                )
            })
            .collect();
        assert_eq!(read, words(&table));
        for (row, word) in rows.iter().zip(table.lookup.words()) {
            let control_v: f64 = row[4].parse().expect("volts");
            assert_eq!(control_v, table.lookup.control(*word) * 6.0);
        }

        let bytes = npy(&table).expect("NPY");
        let array = npyz::NpyFile::new(&bytes[..]).expect("an array");
        assert_eq!(array.shape(), [words(&table).len() as u64, 2]);
        let values: Vec<i32> = array.into_vec().expect("integers");
        let read: Vec<(u32, i32)> = values
            .chunks(2)
            .map(|pair| (pair[0] as u32, pair[1]))
            .collect();
        assert_eq!(read, words(&table));
    }
}

#[test]
fn the_c_header_compiles_and_holds_the_words() {
    for table in tables() {
        let folder = tempfile::tempdir().expect("a folder");
        let path = |name: &str| folder.path().join(name);
        std::fs::write(path("table.h"), c_header(&table)).expect("written");
        let program = "#include <stdio.h>\n#include \"table.h\"\nint main(void) {\n\
            for (int k = 0; k < PREDISTORTION_DEPTH; k++)\n\
            printf(\"%lu %ld\\n\", (unsigned long)predistortion_control[k], (long)predistortion_phase[k]);\n\
            printf(\"%d %d %d %d %d\\n\", PREDISTORTION_ADDRESS_BITS, PREDISTORTION_AMPLITUDE_BITS,\n\
            PREDISTORTION_PHASE_BITS, PREDISTORTION_RATE, PREDISTORTION_INTERPOLATED);\nreturn 0; }\n";
        std::fs::write(path("read.c"), program).expect("written");
        let compiled = Command::new("cc")
            .args([
                "-std=c99",
                "-Wall",
                "-Wextra",
                "-Wconversion",
                "-Werror",
                "-pedantic",
                "-o",
            ])
            .args([path("read"), path("read.c")])
            .output();
        let Ok(compiled) = compiled else {
            eprintln!("skipped: there is no C compiler here");
            return;
        };
        assert!(
            compiled.status.success(),
            "{}",
            String::from_utf8_lossy(&compiled.stderr)
        );
        let output = Command::new(path("read")).output().expect("it runs");
        let mut expected: Vec<String> = words(&table)
            .iter()
            .map(|(c, p)| format!("{c} {p}"))
            .collect();
        let size = table.lookup.size();
        let linear = i32::from(table.lookup.between() == Between::Linear);
        expected.push(format!(
            "{} {} {} 16 {linear}",
            size.address_bits, size.amplitude_bits, size.phase_bits
        ));
        let text = String::from_utf8(output.stdout).expect("text");
        assert_eq!(text.lines().collect::<Vec<_>>(), expected);
    }
}

#[test]
fn the_hex_image_holds_the_words() {
    for table in tables() {
        let size = *table.lookup.size();
        let text = hex_image(&table);
        let mask = (1u64 << size.phase_bits) - 1;
        let read: Vec<(u32, i32)> = text
            .lines()
            .filter(|line| !line.starts_with("//"))
            .map(|line| {
                let word = u64::from_str_radix(line, 16).expect("a hexadecimal word");
                let shift = 64 - size.phase_bits;
                let phase = (((word & mask) << shift) as i64) >> shift;
                ((word >> size.phase_bits) as u32, phase as i32)
            })
            .collect();
        assert_eq!(read, words(&table));
    }
}

/// As a Verilog simulator loads it (Icarus Verilog, where it is installed).
#[test]
fn the_hex_image_is_loaded_by_a_verilog_simulator() {
    if Command::new("iverilog").arg("-V").output().is_err() {
        eprintln!(
            "skipped: there is no Verilog simulator here; the parser above reads the image all the same"
        );
        return;
    }
    for table in tables() {
        let folder = tempfile::tempdir().expect("a folder");
        let path = |name: &str| folder.path().join(name);
        std::fs::write(path("table.hex"), hex_image(&table)).expect("written");
        let size = table.lookup.size();
        let width = size.amplitude_bits + size.phase_bits;
        let (top, last, phase) = (width - 1, size.depth - 1, size.phase_bits);
        let module = format!(
            "module read;\n\
             reg [{top}:0] table_rom [0:{last}];\n\
             reg signed [{}:0] phase; integer k;\n\
             initial begin\n\
             $readmemh(\"{}\", table_rom);\n\
             for (k = 0; k <= {last}; k = k + 1) begin\n\
             phase = table_rom[k][{}:0];\n\
             $display(\"%0d %0d\", table_rom[k][{top}:{phase}], phase);\n\
             end\nend\nendmodule\n",
            phase - 1,
            path("table.hex").display(),
            phase - 1,
        );
        let mut file = std::fs::File::create(path("read.v")).expect("made");
        file.write_all(module.as_bytes()).expect("written");
        let compiled = Command::new("iverilog")
            .arg("-o")
            .args([path("read"), path("read.v")])
            .output()
            .expect("runs");
        assert!(
            compiled.status.success(),
            "{}",
            String::from_utf8_lossy(&compiled.stderr)
        );
        let output = Command::new("vvp")
            .arg(path("read"))
            .output()
            .expect("runs");
        let text = String::from_utf8(output.stdout).expect("text");
        let expected: Vec<String> = words(&table)
            .iter()
            .map(|(c, p)| format!("{c} {p}"))
            .collect();
        assert_eq!(
            text.lines().collect::<Vec<_>>(),
            expected,
            "{}",
            String::from_utf8_lossy(&output.stderr)
        );
    }
}

proptest::proptest! {
    #[test]
    fn any_change_to_a_table_file_is_read_or_refused(at in 0usize..2000, with in proptest::prelude::any::<u8>()) {
        let mut bytes = serde_json::to_vec(&json(&tables()[1])).expect("JSON");
        let length = bytes.len();
        bytes[at % length] = with;
        if let Ok(table) = read_table("table.json", &bytes[..]) {
            proptest::prop_assert!(table.lookup.words().len() == table.lookup.size().depth);
            let word = table.lookup.word(0.7);
            proptest::prop_assert!(word.control <= table.lookup.size().top_word());
        }
    }
}

#[test]
fn spoilt_tables_are_refused_with_a_reason() {
    let good = json(&tables()[1]);
    let read = |change: &dyn Fn(&mut serde_json::Value)| {
        let mut document = good.clone();
        change(&mut document);
        let bytes = serde_json::to_vec(&document).expect("JSON");
        read_table("table.json", &bytes[..])
            .err()
            .map(|problem| problem.to_string())
    };
    assert_eq!(read(&|_| {}), None);
    let expect = |change: &dyn Fn(&mut serde_json::Value), said: &str| {
        let text = read(change).unwrap_or_else(|| panic!("accepted where \"{said}\" was due"));
        assert!(text.contains(said) && text.contains("table.json"), "{text}");
    };
    expect(&|d| d["depth"] = 299.into(), "300 words for 299 entries");
    expect(&|d| d["depth"] = 100_000_000_000u64.into(), "65536 entries");
    expect(&|d| d["phase_bits"] = 40.into(), "24 bits");
    expect(&|d| d["control_words"][7] = 4096.into(), "entry 7");
    expect(&|d| d["phase_words"][8] = 256.into(), "entry 8");
    expect(
        &|d| d["control_words"] = serde_json::json!([1]),
        "1 control words and 300",
    );
    expect(&|d| d["rate"] = 24.into(), "24 times");
    expect(&|d| d["kind"] = "other".into(), "static table");
    expect(&|d| d["full_control"] = 0.into(), "full_control = 0");
    expect(
        &|d| d["spacing"] = serde_json::json!({"law": "companded", "mu": -1.0}),
        "mu = -1",
    );
    expect(&|d| d["control_words"][0] = (-1).into(), "-1");
    expect(&|d| d["between"] = "cubic".into(), "cubic");
    let cut = serde_json::to_vec(&good).expect("JSON");
    assert!(read_table("table.json", &cut[..100]).is_err());
    assert!(read_table("table.json", &[0xff, 0xfe][..]).is_err());
}
