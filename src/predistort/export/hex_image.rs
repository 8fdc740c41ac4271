//! A memory image for `$readmemh` (IEEE 1364, Verilog).

use std::fmt::Write;

use super::facts;
use crate::predistort::Table;

/// One word an address from 0 upwards, in hexadecimal: the control's word in the upper bits, the phase's word in
/// two's complement below it. Comments stand before the first word.
pub fn hex_image(table: &Table) -> String {
    let size = table.lookup.size();
    let width = size.amplitude_bits + size.phase_bits;
    let mut text = String::new();
    for (key, value) in facts(table) {
        let _ = writeln!(text, "// {key} = {value}");
    }
    let _ = writeln!(
        text,
        "// load: reg [{}:0] table_rom [0:{}]; initial $readmemh(\"table.hex\", table_rom);",
        width - 1,
        size.depth - 1
    );
    let _ = writeln!(
        text,
        "// control = word[{}:{}], unsigned; phase = word[{}:0], two's complement, 2^{} is a turn",
        width - 1,
        size.phase_bits,
        size.phase_bits - 1,
        size.phase_bits
    );
    let mask = (1u64 << size.phase_bits) - 1;
    let digits = width.div_ceil(4) as usize;
    for word in table.lookup.words() {
        let packed = (u64::from(word.control) << size.phase_bits) | (word.phase as u64 & mask);
        let _ = writeln!(text, "{packed:0digits$x}");
    }
    text
}
