//! The colours of pictures and pages, for light and dark surroundings.
//!
//! Curves differ in lightness and in blue against yellow, which the common colour-vision deficiencies
//! keep apart, and also in width and dash. Text colours reach a contrast of 4.5 to 1 against the paper
//! in both themes (the relative-luminance formula of WCAG 2, sRGB), which a test checks.

/// What a stroke, fill or text stands for; each has one colour per theme.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Role {
    /// The background.
    Paper,
    /// Text and strong lines.
    Ink,
    /// Secondary text.
    Muted,
    /// Frames of panels.
    Frame,
    /// Grid lines.
    Grid,
    /// A shaded stretch of an axis, or a density.
    Wash,
    /// First curve: the output.
    First,
    /// Second curve: what was wanted.
    Second,
    /// Third curve.
    Third,
    /// Fourth curve.
    Fourth,
    /// Fifth curve.
    Fifth,
    /// A limit, and what breaks it.
    Limit,
    /// What keeps a limit.
    Within,
}

impl Role {
    /// All roles, in the order of their codes.
    pub const ALL: [Self; 13] = [
        Self::Paper,
        Self::Ink,
        Self::Muted,
        Self::Frame,
        Self::Grid,
        Self::Wash,
        Self::First,
        Self::Second,
        Self::Third,
        Self::Fourth,
        Self::Fifth,
        Self::Limit,
        Self::Within,
    ];

    /// The colour of curve number `index`, round and round.
    pub fn curve(index: usize) -> Self {
        const CURVES: [Role; 5] = [
            Role::First,
            Role::Second,
            Role::Third,
            Role::Fourth,
            Role::Fifth,
        ];
        CURVES[index % CURVES.len()]
    }

    /// Name of the CSS variable, without the dashes in front.
    pub fn name(self) -> &'static str {
        match self {
            Self::Paper => "paper",
            Self::Ink => "ink",
            Self::Muted => "muted",
            Self::Frame => "frame",
            Self::Grid => "grid",
            Self::Wash => "wash",
            Self::First => "first",
            Self::Second => "second",
            Self::Third => "third",
            Self::Fourth => "fourth",
            Self::Fifth => "fifth",
            Self::Limit => "limit",
            Self::Within => "within",
        }
    }

    /// sRGB on light paper, and in print.
    pub fn light(self) -> [u8; 3] {
        match self {
            Self::Paper => [0xfd, 0xfc, 0xf9],
            Self::Ink => [0x1c, 0x22, 0x28],
            Self::Muted => [0x56, 0x5f, 0x68],
            Self::Frame => [0x9a, 0xa1, 0xa6],
            Self::Grid => [0xe0, 0xe2, 0xdf],
            Self::Wash => [0xdc, 0xe5, 0xe6],
            Self::First => [0x00, 0x4f, 0x86],
            Self::Second => [0x8f, 0x52, 0x00],
            Self::Third => [0x7d, 0x3c, 0x98],
            Self::Fourth => [0x0d, 0x6b, 0x62],
            Self::Fifth => [0x5f, 0x64, 0x00],
            Self::Limit => [0xb0, 0x12, 0x3c],
            Self::Within => [0x17, 0x63, 0x48],
        }
    }

    /// sRGB on dark paper.
    pub fn dark(self) -> [u8; 3] {
        match self {
            Self::Paper => [0x14, 0x19, 0x1d],
            Self::Ink => [0xe8, 0xea, 0xe6],
            Self::Muted => [0xa6, 0xb0, 0xb5],
            Self::Frame => [0x65, 0x70, 0x77],
            Self::Grid => [0x2a, 0x32, 0x38],
            Self::Wash => [0x26, 0x37, 0x3d],
            Self::First => [0x72, 0xbc, 0xf0],
            Self::Second => [0xe6, 0xad, 0x4e],
            Self::Third => [0xcb, 0xa2, 0xe6],
            Self::Fourth => [0x5f, 0xcb, 0xba],
            Self::Fifth => [0xc6, 0xcf, 0x63],
            Self::Limit => [0xff, 0x86, 0x9c],
            Self::Within => [0x74, 0xd1, 0xa5],
        }
    }

    pub(crate) fn code(self) -> u8 {
        self as u8
    }
}

/// The CSS declarations of the colours of one theme: `--ink:#1c2228;...`.
pub fn declarations(colour: fn(Role) -> [u8; 3]) -> String {
    Role::ALL
        .iter()
        .map(|&role| {
            let [r, g, b] = colour(role);
            format!("--{}:#{r:02x}{g:02x}{b:02x};", role.name())
        })
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    /// WCAG 2.2, "relative luminance" and "contrast ratio".
    fn contrast(a: [u8; 3], b: [u8; 3]) -> f64 {
        let luminance = |colour: [u8; 3]| {
            let linear = colour.map(|c| {
                let c = f64::from(c) / 255.0;
                if c <= 0.04045 {
                    c / 12.92
                } else {
                    ((c + 0.055) / 1.055).powf(2.4)
                }
            });
            0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]
        };
        let (a, b) = (luminance(a), luminance(b));
        (a.max(b) + 0.05) / (a.min(b) + 0.05)
    }

    #[test]
    fn contrast_is_computed_as_published() {
        // Black on white is 21 to 1 by definition; #767676 on white is the well-known 4.54.
        assert!((contrast([0; 3], [255; 3]) - 21.0).abs() < 1e-9);
        assert!((contrast([0x76; 3], [255; 3]) - 4.54).abs() < 0.005);
    }

    #[test]
    fn text_stands_out_in_both_themes_and_on_shaded_ground() {
        use Role::*;
        for role in [
            Ink, Muted, First, Second, Third, Fourth, Fifth, Limit, Within,
        ] {
            for colour in [Role::light, Role::dark] {
                for ground in [Paper, Wash] {
                    let reached = contrast(colour(role), colour(ground));
                    assert!(reached >= 4.5, "{role:?} on {ground:?}: {reached:.2}");
                }
            }
            // Print is white paper, whatever the theme.
            assert!(contrast(role.light(), [255; 3]) >= 4.5, "{role:?} in print");
        }
    }

    #[test]
    fn codes_follow_the_order() {
        for (index, role) in Role::ALL.iter().enumerate() {
            assert_eq!(usize::from(role.code()), index);
        }
    }
}
