//! Text with units to and from SI numbers, and decibels.
//!
//! `"22 pF"`, `"169.4 MHz"`, `"0.18 ohm"`, `"-3 dB"`. A bare number is SI. The space between number
//! and unit is optional. Prefixes: p n u µ m k M G T; `f` (femto) too.

use std::fmt;

/// What a number measures, and so which units it may carry.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub enum Dimension {
    /// Hz
    Frequency,
    /// s
    Time,
    /// V
    Voltage,
    /// A
    Current,
    /// W
    Power,
    /// ohm
    Resistance,
    /// F
    Capacitance,
    /// H
    Inductance,
    /// C
    Charge,
    /// V/s
    SlewRate,
    /// Where a pole or zero lies, rad/s inside; `Hz` is 2 pi times as much.
    Root,
    /// A pure number; `%` is allowed.
    Ratio,
    /// dB
    Decibel,
    /// An angle, radians inside; `deg` and `rad` are allowed.
    Angle,
    /// A power level, dBm inside; `W` with a prefix is allowed too.
    Level,
}

impl Dimension {
    /// The unit of a bare number, as text.
    pub fn unit(self) -> &'static str {
        match self {
            Self::Frequency => "Hz",
            Self::Time => "s",
            Self::Voltage => "V",
            Self::Current => "A",
            Self::Power => "W",
            Self::Resistance => "ohm",
            Self::Capacitance => "F",
            Self::Inductance => "H",
            Self::Charge => "C",
            Self::SlewRate => "V/s",
            Self::Root => "rad/s",
            Self::Ratio => "",
            Self::Decibel => "dB",
            Self::Angle => "rad",
            Self::Level => "dBm",
        }
    }

    /// The smallest and the largest magnitude that any part, signal or instrument of this field has, zero
    /// aside, in SI. What lies outside is a slip of the keyboard, and would only end in overflow.
    pub fn plausible(self) -> (f64, f64) {
        match self {
            Self::Frequency => (1e-6, 1e15),
            Self::Time => (1e-18, 1e9),
            Self::Voltage | Self::Current => (1e-12, 1e9),
            Self::Power => (1e-24, 1e12),
            Self::Resistance => (1e-9, 1e15),
            Self::Capacitance => (1e-21, 1e3),
            Self::Charge => (1e-21, 1e3),
            Self::Inductance => (1e-18, 1e6),
            Self::SlewRate => (1e-9, 1e18),
            Self::Root => (1e-6, 1e15),
            Self::Ratio => (1e-15, 1e15),
            Self::Decibel | Self::Level => (0.0, 1e4),
            Self::Angle => (0.0, 1e6),
        }
    }

    /// True where `value` is zero or of a [plausible](Self::plausible) magnitude.
    pub fn is_plausible(self, value: f64) -> bool {
        let (least, most) = self.plausible();
        value == 0.0 || (least..=most).contains(&value.abs())
    }

    /// The plausible magnitudes in words: `a voltage of 1 pV to 1 GV in magnitude`.
    pub fn plausible_text(self) -> String {
        let (least, most) = self.plausible();
        let show = |value: f64| show(value, self.unit(), 3);
        format!(
            "{} of {} to {} in magnitude",
            self.name(),
            show(least),
            show(most)
        )
    }

    /// What the dimension is called in messages.
    pub fn name(self) -> &'static str {
        match self {
            Self::Frequency => "a frequency",
            Self::Time => "a time",
            Self::Voltage => "a voltage",
            Self::Current => "a current",
            Self::Power => "a power",
            Self::Resistance => "a resistance",
            Self::Capacitance => "a capacitance",
            Self::Inductance => "an inductance",
            Self::Charge => "a charge",
            Self::SlewRate => "a slew rate",
            Self::Root => "a place of a pole or zero",
            Self::Ratio => "a pure number",
            Self::Decibel => "a ratio in dB",
            Self::Angle => "an angle",
            Self::Level => "a power level",
        }
    }

    /// Ways of writing it, for messages.
    pub fn example(self) -> &'static str {
        match self {
            Self::Frequency => "\"169.4 MHz\"",
            Self::Time => "\"300 ns\"",
            Self::Voltage => "\"6 V\"",
            Self::Current => "\"250 mA\"",
            Self::Power => "\"5 W\"",
            Self::Resistance => "\"0.18 ohm\"",
            Self::Capacitance => "\"22 pF\"",
            Self::Inductance => "\"8.2 nH\"",
            Self::Charge => "\"2 nC\"",
            Self::SlewRate => "\"40 V/us\"",
            Self::Root => "\"60 kHz\" or \"377 krad/s\"",
            Self::Ratio => "0.5 or \"50 %\"",
            Self::Decibel => "\"-3 dB\"",
            Self::Angle => "\"30 deg\"",
            Self::Level => "\"37 dBm\" or \"5 W\"",
        }
    }

    /// The factor (and, for levels, the conversion) that brings `unit` to SI.
    fn convert(self, number: f64, unit: &str) -> Option<f64> {
        let scaled =
            |symbol: &str| prefix(unit.strip_suffix(symbol)?).map(|power| scale(number, power));
        match self {
            Self::Frequency => scaled("Hz"),
            Self::Time => scaled("s"),
            Self::Voltage => scaled("V"),
            Self::Current => scaled("A"),
            Self::Power => scaled("W"),
            Self::Resistance => scaled("ohm")
                .or_else(|| scaled("Ohm"))
                .or_else(|| scaled("Ω")),
            Self::Capacitance => scaled("F"),
            Self::Inductance => scaled("H"),
            Self::Charge => scaled("C"),
            Self::SlewRate => {
                let (volt, time) = unit.split_once('/')?;
                let volt = prefix(volt.strip_suffix('V')?)?;
                let time = prefix(time.strip_suffix('s')?)?;
                Some(scale(number, volt - time))
            }
            Self::Root => {
                scaled("rad/s").or_else(|| scaled("Hz").map(|hertz| std::f64::consts::TAU * hertz))
            }
            Self::Ratio => (unit == "%").then(|| number / 100.0),
            Self::Decibel => (unit == "dB").then_some(number),
            Self::Angle => match unit {
                "deg" | "°" => Some(number.to_radians()),
                "rad" => Some(number),
                _ => None,
            },
            Self::Level => match unit {
                "dBm" => Some(number),
                "dBW" => Some(number + 30.0),
                _ => scaled("W").filter(|watt| *watt > 0.0).map(dbm_from_watt),
            },
        }
    }
}

impl fmt::Display for Dimension {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(self.name())
    }
}

/// `number * 10^power`, rounded once: dividing by an exact power of ten keeps `"22 pF"` equal to `22e-12`.
fn scale(number: f64, power: i32) -> f64 {
    if power < 0 {
        number / 10f64.powi(-power)
    } else {
        number * 10f64.powi(power)
    }
}

fn prefix(text: &str) -> Option<i32> {
    Some(match text {
        "" => 0,
        "f" => -15,
        "p" => -12,
        "n" => -9,
        "u" | "µ" | "μ" => -6,
        "m" => -3,
        "k" => 3,
        "M" => 6,
        "G" => 9,
        "T" => 12,
        _ => return None,
    })
}

/// Why a text is no quantity.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
pub enum UnitError {
    /// No number at the start.
    #[error("no number at the start")]
    NoNumber,
    /// The number is infinite or not a number.
    #[error("the number is not finite")]
    NotFinite,
    /// The unit belongs to something else.
    #[error("\"{unit}\" is no unit of {dimension}")]
    WrongUnit {
        /// As given.
        unit: String,
        /// As wanted.
        dimension: Dimension,
    },
}

/// Reads `text` as a quantity of `dimension`, in SI (dBm for [`Dimension::Level`]).
///
/// # Errors
/// No number, a number that is not finite, or a unit of something else.
pub fn parse(text: &str, dimension: Dimension) -> Result<f64, UnitError> {
    let text = text.trim();
    let (number, unit) = split_number(text).ok_or(UnitError::NoNumber)?;
    let unit = unit.trim();
    let value = if unit.is_empty() {
        number
    } else {
        dimension
            .convert(number, unit)
            .ok_or_else(|| UnitError::WrongUnit {
                unit: unit.to_owned(),
                dimension,
            })?
    };
    if value.is_finite() {
        Ok(value)
    } else {
        Err(UnitError::NotFinite)
    }
}

/// The longest start of `text` that is a decimal number, and the rest.
fn split_number(text: &str) -> Option<(f64, &str)> {
    let bytes = text.as_bytes();
    let digits = |mut at: usize| {
        while bytes.get(at).is_some_and(u8::is_ascii_digit) {
            at += 1;
        }
        at
    };
    let sign = usize::from(matches!(bytes.first(), Some(b'+' | b'-')));
    let mut end = digits(sign);
    if bytes.get(end) == Some(&b'.') {
        end = digits(end + 1);
    }
    if matches!(bytes.get(end), Some(b'e' | b'E')) {
        let signed = end + 1 + usize::from(matches!(bytes.get(end + 1), Some(b'+' | b'-')));
        let exponent_end = digits(signed);
        if exponent_end > signed {
            end = exponent_end;
        }
    }
    let number = text[..end].parse().ok()?;
    Some((number, &text[end..]))
}

/// Writes `value` with a prefix and about `digits` significant digits: `0.000_000_000_022` F to `22 pF`.
pub fn show(value: f64, unit: &str, digits: usize) -> String {
    if value == 0.0 || !value.is_finite() {
        return format!("{value} {unit}").trim_end().to_owned();
    }
    const PREFIXES: [&str; 10] = ["f", "p", "n", "u", "m", "", "k", "M", "G", "T"];
    let digits = digits.clamp(1, 17) as i32;
    // What no prefix can shorten is left to scientific notation.
    if !(1e-24..1e24).contains(&value.abs()) {
        return format!("{value:.*e} {unit}", digits as usize - 1)
            .trim_end()
            .to_owned();
    }
    // Round first: 999.96 at four digits is 1.000 k.
    let exponent = value.abs().log10().floor() as i32;
    let quantum = 10f64.powi((exponent - digits + 1).max(-300));
    let rounded = (value / quantum).round() * quantum;
    let exponent = (rounded.abs().log10() + 1e-12).floor() as i32;
    let group = if unit.is_empty() {
        0
    } else {
        exponent.div_euclid(3).clamp(-5, 4)
    };
    let mantissa = scale(rounded, -3 * group);
    let decimals = (digits - 1 - (exponent - 3 * group)).max(0) as usize;
    let mut text = format!("{mantissa:.decimals$}");
    if text.contains('.') {
        text.truncate(text.trim_end_matches('0').trim_end_matches('.').len());
    }
    format!("{text} {}{unit}", PREFIXES[(group + 5) as usize])
        .trim_end()
        .to_owned()
}

/// `10 log10(ratio)`, dB of a power ratio; minus infinity for zero.
pub fn db(power_ratio: f64) -> f64 {
    10.0 * power_ratio.log10()
}

/// The power ratio of `db`.
pub fn from_db(db: f64) -> f64 {
    10f64.powf(db / 10.0)
}

/// dBm of a power in watts.
pub fn dbm_from_watt(watt: f64) -> f64 {
    db(watt) + 30.0
}

/// Watts of a power in dBm.
pub fn watt_from_dbm(dbm: f64) -> f64 {
    from_db(dbm - 30.0)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn reads_units_as_engineers_write_them() {
        for (text, dimension, si) in [
            ("22 pF", Dimension::Capacitance, 22e-12),
            ("169.4MHz", Dimension::Frequency, 169.4e6),
            ("0.18 ohm", Dimension::Resistance, 0.18),
            ("-3 dB", Dimension::Decibel, -3.0),
            ("4.7 µs", Dimension::Time, 4.7e-6),
            ("40 V/us", Dimension::SlewRate, 40e6),
            ("-60 kHz", Dimension::Root, -60e3 * std::f64::consts::TAU),
            ("377 krad/s", Dimension::Root, 377e3),
            ("50 %", Dimension::Ratio, 0.5),
            ("5 W", Dimension::Level, 36.989_700_043_360_19),
            ("1e-12", Dimension::Capacitance, 1e-12),
            ("180 deg", Dimension::Angle, std::f64::consts::PI),
        ] {
            assert_eq!(parse(text, dimension), Ok(si), "{text}");
        }
    }

    #[test]
    fn refuses_what_measures_something_else() {
        for (text, dimension) in [
            ("22 pF", Dimension::Inductance),
            ("22 Mhz", Dimension::Frequency),
            ("5 kg", Dimension::Power),
            ("1 eV", Dimension::Voltage),
            ("0 W", Dimension::Level),
        ] {
            assert!(
                matches!(parse(text, dimension), Err(UnitError::WrongUnit { .. })),
                "{text}"
            );
        }
        for text in ["", "pF", "nan", "inf V", "-", ".", "- 3 V"] {
            assert_eq!(
                parse(text, Dimension::Voltage),
                Err(UnitError::NoNumber),
                "{text}"
            );
        }
        assert_eq!(
            parse("1e999 V", Dimension::Voltage),
            Err(UnitError::NotFinite)
        );
    }

    #[test]
    fn shows_prefixes() {
        for (value, unit, text) in [
            (22e-12, "F", "22 pF"),
            (999.96, "Hz", "1 kHz"),
            (169.4e6, "Hz", "169.4 MHz"),
            (0.0, "V", "0 V"),
            (-0.25, "A", "-250 mA"),
            (0.123_456, "", "0.1235"),
            (1e-21, "F", "0.000001 fF"),
            (3.3e-310, "W", "3.300e-310 W"),
            (-5e30, "V", "-5.000e30 V"),
        ] {
            assert_eq!(show(value, unit, 4), text);
        }
    }
}
