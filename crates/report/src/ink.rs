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
    [0x76, 0x8a, 0x8f],
    [0xb8, 0x7e, 0x42],
    [0x82, 0x4e, 0x3c],
    [0x2f, 0x86, 0x90],
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
