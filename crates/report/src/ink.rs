//! Colours by the role they play, for light paper and for a dark screen.
//!
//! Lines alternate between a copper and a petrol row, and both rows run from light to dark: neighbours differ in hue along
//! the axis that most colour-blind readers see, and within a row lightness says which is which, in print too.

/// What a colour is for. A drawing names roles; the file and the PNG take the light colours, a page may set others
/// ([`stylesheet`]).
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Ink {
    /// The ground.
    Paper,
    /// Text and axes.
    Text,
    /// Lesser text.
    Soft,
    /// Grid lines.
    Grid,
    /// Reference lines.
    Mark,
    /// Line by its place in the palette.
    Line(u8),
    /// State of a configuration by its place among the shades.
    State(u8),
    /// Domain walls.
    Wall,
    /// A colour that stays.
    Fixed([u8; 3]),
}

/// Number of line colours.
pub(crate) const LINES: usize = 8;
/// Number of shades of states.
pub(crate) const STATES: usize = 6;

/// Copper at even places, petrol at odd ones; on paper.
pub(crate) const LINES_LIGHT: [[u8; 3]; LINES] = [
    [0xcb, 0x84, 0x34],
    [0x3f, 0x93, 0x99],
    [0xa6, 0x55, 0x26],
    [0x1f, 0x70, 0x8f],
    [0x7c, 0x31, 0x22],
    [0x1c, 0x4c, 0x74],
    [0x4a, 0x1c, 0x16],
    [0x12, 0x25, 0x46],
];

/// The same on a dark screen, where the last line is the brightest.
pub(crate) const LINES_DARK: [[u8; 3]; LINES] = [
    [0xa8, 0x5a, 0x32],
    [0x3a, 0x7f, 0x9c],
    [0xc8, 0x78, 0x42],
    [0x55, 0x9f, 0xb8],
    [0xe3, 0x9c, 0x62],
    [0x7c, 0xbf, 0xcc],
    [0xf6, 0xc8, 0x94],
    [0xb4, 0xe6, 0xe6],
];

/// Shades of states: far apart in lightness first, since most configurations have two or three states.
const STATES_LIGHT: [[u8; 3]; STATES] = [
    [0x3d, 0x4a, 0x57],
    [0xe9, 0xe1, 0xd2],
    [0x8f, 0xa3, 0xa6],
    [0xc4, 0x8a, 0x4c],
    [0x74, 0x45, 0x35],
    [0x2a, 0x7c, 0x86],
];
const STATES_DARK: [[u8; 3]; STATES] = [
    [0x2a, 0x34, 0x3e],
    [0xcf, 0xc6, 0xb4],
    [0x8d, 0xa0, 0xa5],
    [0xb8, 0x7e, 0x42],
    [0x8a, 0x50, 0x3c],
    [0x1f, 0x68, 0x74],
];

impl Ink {
    /// The colour on paper.
    pub(crate) fn light(self) -> [u8; 3] {
        match self {
            Ink::Paper => [0xff, 0xff, 0xff],
            Ink::Text => [0x1d, 0x24, 0x2b],
            Ink::Soft => [0x57, 0x61, 0x6b],
            Ink::Grid => [0xe4, 0xe1, 0xda],
            Ink::Mark => [0x6b, 0x5a, 0x7a],
            Ink::Line(i) => LINES_LIGHT[usize::from(i) % LINES],
            Ink::State(i) => STATES_LIGHT[usize::from(i) % STATES],
            Ink::Wall => [0xb0, 0x3a, 0x1e],
            Ink::Fixed(rgb) => rgb,
        }
    }

    /// The colour on a dark screen.
    pub(crate) fn dark(self) -> [u8; 3] {
        match self {
            Ink::Paper => [0x15, 0x1a, 0x1f],
            Ink::Text => [0xe6, 0xe3, 0xdc],
            Ink::Soft => [0xa3, 0xaa, 0xb0],
            Ink::Grid => [0x2c, 0x33, 0x3a],
            Ink::Mark => [0xb8, 0xa6, 0xca],
            Ink::Line(i) => LINES_DARK[usize::from(i) % LINES],
            Ink::State(i) => STATES_DARK[usize::from(i) % STATES],
            Ink::Wall => [0xff, 0x7a, 0x50],
            Ink::Fixed(rgb) => rgb,
        }
    }

    /// The word by which a stylesheet can reach it; none for a colour that stays.
    pub(crate) fn word(self) -> Option<String> {
        Some(match self {
            Ink::Paper => "paper".to_owned(),
            Ink::Text => "text".to_owned(),
            Ink::Soft => "soft".to_owned(),
            Ink::Grid => "grid".to_owned(),
            Ink::Mark => "mark".to_owned(),
            Ink::Line(i) => format!("line{}", usize::from(i) % LINES),
            Ink::State(i) => format!("state{}", usize::from(i) % STATES),
            Ink::Wall => "wall".to_owned(),
            Ink::Fixed(_) => return None,
        })
    }

    /// Every ink that a stylesheet can reach.
    fn all() -> impl Iterator<Item = Ink> {
        [Ink::Paper, Ink::Text, Ink::Soft, Ink::Grid, Ink::Mark, Ink::Wall]
            .into_iter()
            .chain((0..LINES as u8).map(Ink::Line))
            .chain((0..STATES as u8).map(Ink::State))
    }
}

/// `#rrggbb`.
pub(crate) fn hex([r, g, b]: [u8; 3]) -> String {
    format!("#{r:02x}{g:02x}{b:02x}")
}

/// Declarations of all inks as variables (`--sl-text:#1d242b;` ...), light or dark.
pub(crate) fn variables(dark: bool) -> String {
    Ink::all()
        .filter_map(|ink| Some(format!("--sl-{}:{};", ink.word()?, hex(if dark { ink.dark() } else { ink.light() }))))
        .collect()
}

/// Rules by which drawings inside a page take these variables. Rules win over the presentation attributes that a
/// drawing carries for itself.
pub(crate) fn stylesheet() -> String {
    Ink::all()
        .filter_map(|ink| ink.word())
        .map(|word| format!(".f-{word}{{fill:var(--sl-{word})}}.s-{word}{{stroke:var(--sl-{word})}}"))
        .collect()
}

/// Places in the palette for a number of lines: spread over its whole range.
pub(crate) fn places(lines: usize) -> &'static [u8] {
    match lines {
        0 | 1 => &[5],
        2 => &[2, 5],
        3 => &[0, 3, 6],
        4 => &[0, 3, 4, 7],
        5 => &[0, 1, 4, 5, 7],
        6 => &[0, 1, 2, 5, 6, 7],
        7 => &[0, 1, 2, 3, 4, 5, 7],
        _ => &[0, 1, 2, 3, 4, 5, 6, 7],
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// sRGB to linear light (IEC 61966-2-1).
    fn linear(rgb: [u8; 3]) -> [f64; 3] {
        rgb.map(|c| {
            let c = f64::from(c) / 255.0;
            if c <= 0.040_45 { c / 12.92 } else { ((c + 0.055) / 1.055).powf(2.4) }
        })
    }

    fn luminance([r, g, b]: [f64; 3]) -> f64 {
        0.2126 * r + 0.7152 * g + 0.0722 * b
    }

    /// CIE 1976 L*a*b* with white D65.
    fn lab([r, g, b]: [f64; 3]) -> [f64; 3] {
        let x = (0.4124 * r + 0.3576 * g + 0.1805 * b) / 0.9505;
        let y = luminance([r, g, b]);
        let z = (0.0193 * r + 0.1192 * g + 0.9505 * b) / 1.0888;
        let f = |t: f64| if t > 0.008_856 { t.cbrt() } else { 7.787 * t + 16.0 / 116.0 };
        [116.0 * f(y) - 16.0, 500.0 * (f(x) - f(y)), 200.0 * (f(y) - f(z))]
    }

    /// What is seen without one kind of cone: Machado, Oliveira & Fernandes 2009, severity 1, on linear light.
    const VIEWS: [(&str, [[f64; 3]; 3]); 4] = [
        ("all cones", [[1.0, 0.0, 0.0], [0.0, 1.0, 0.0], [0.0, 0.0, 1.0]]),
        (
            "protanopia",
            [
                [0.152_286, 1.052_583, -0.204_868],
                [0.114_503, 0.786_281, 0.099_216],
                [-0.003_882, -0.048_116, 1.051_998],
            ],
        ),
        (
            "deuteranopia",
            [[0.367_322, 0.860_646, -0.227_968], [0.280_085, 0.672_501, 0.047_413], [-0.011_820, 0.042_940, 0.968_881]],
        ),
        (
            "tritanopia",
            [
                [1.255_528, -0.076_749, -0.178_779],
                [-0.078_411, 0.930_809, 0.147_602],
                [0.004_733, 0.691_367, 0.303_900],
            ],
        ),
    ];

    fn seen(rgb: [u8; 3], view: &[[f64; 3]; 3]) -> [f64; 3] {
        let c = linear(rgb);
        lab(view.map(|row| (0..3).map(|i| row[i] * c[i]).sum::<f64>().clamp(0.0, 1.0)))
    }

    fn distance(a: [f64; 3], b: [f64; 3]) -> f64 {
        (0..3).map(|i| (a[i] - b[i]).powi(2)).sum::<f64>().sqrt()
    }

    /// Two lines of one chart can be told apart with any two kinds of cones, on paper and on a dark screen. A distance of 2.3 in
    /// L*a*b* is just noticeable side by side; thin lines need several times that.
    #[test]
    fn lines_can_be_told_apart_by_all() {
        for (ground, colours) in [("light", LINES_LIGHT), ("dark", LINES_DARK)] {
            for count in 2..=LINES {
                let least = if count <= 4 { 20.0 } else { 10.0 };
                for (name, view) in &VIEWS {
                    for (i, &a) in places(count).iter().enumerate() {
                        for &b in &places(count)[..i] {
                            let d = distance(seen(colours[usize::from(a)], view), seen(colours[usize::from(b)], view));
                            assert!(d >= least, "{ground}, {count} lines, {name}: {a} and {b} are {d:.1} apart");
                        }
                    }
                }
            }
        }
    }

    /// Up to four lines differ in print without colour, too.
    #[test]
    fn few_lines_differ_in_grey() {
        for (ground, colours) in [("light", LINES_LIGHT), ("dark", LINES_DARK)] {
            for count in 2..=4 {
                let greys: Vec<f64> = places(count).iter().map(|&i| lab(linear(colours[usize::from(i)]))[0]).collect();
                for (i, a) in greys.iter().enumerate() {
                    for b in &greys[..i] {
                        assert!((a - b).abs() >= 8.0, "{ground}, {count} lines: lightness {greys:.1?}");
                    }
                }
            }
        }
    }

    /// Contrast as WCAG 2 counts it: 4.5 for text, 3 for what is drawn.
    #[test]
    fn everything_stands_out_from_the_ground() {
        for dark in [false, true] {
            let colour = |ink: Ink| if dark { ink.dark() } else { ink.light() };
            let ground = luminance(linear(colour(Ink::Paper)));
            let drawn = [Ink::Text, Ink::Soft, Ink::Mark, Ink::Wall].into_iter().chain((0..LINES as u8).map(Ink::Line));
            for ink in drawn {
                let one = luminance(linear(colour(ink)));
                let contrast = (one.max(ground) + 0.05) / (one.min(ground) + 0.05);
                let least = if matches!(ink, Ink::Text | Ink::Soft | Ink::Mark) { 4.5 } else { 3.0 };
                assert!(contrast >= least, "{ink:?}, dark {dark}: {contrast:.2}");
            }
        }
    }

    /// Shades of states: two states far apart, six told apart by all.
    #[test]
    fn states_can_be_told_apart() {
        for colours in [STATES_LIGHT, STATES_DARK] {
            for (name, view) in &VIEWS {
                for i in 0..STATES {
                    for j in 0..i {
                        let d = distance(seen(colours[i], view), seen(colours[j], view));
                        let least = if i == 1 { 45.0 } else { 12.0 };
                        assert!(d >= least, "{name}: states {i} and {j} are {d:.1} apart");
                    }
                }
            }
        }
    }
}
