//! Text as outlines of an embedded font (`font/README.md`), so that a drawing needs none.

use crate::path::Path;
use ttf_parser::{Face, OutlineBuilder};

static REGULAR: &[u8] = include_bytes!("../font/Inter-Regular.subset.otf");
static HEAVY: &[u8] = include_bytes!("../font/Inter-SemiBold.subset.otf");

/// Thickness of letters.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Weight {
    Regular,
    Heavy,
}

thread_local! {
    // A face borrows a static and is cheap to look things up in, but not free to parse.
    static FACES: [Option<Face<'static>>; 2] = [Face::parse(REGULAR, 0).ok(), Face::parse(HEAVY, 0).ok()];
}

fn with_face<T>(weight: Weight, none: T, work: impl FnOnce(&Face<'static>) -> T) -> T {
    FACES.with(|faces| match &faces[usize::from(weight == Weight::Heavy)] {
        Some(face) => work(face),
        None => none,
    })
}

/// Letters that the font lacks and a near relative has.
fn relative(letter: char) -> char {
    match letter {
        '⟨' => '‹',
        '⟩' => '›',
        '\t' | '\n' | '\r' => ' ',
        other => other,
    }
}

/// Whether a letter takes part in drawing at all: controls and direction marks do not.
fn shows(letter: char) -> bool {
    !(letter.is_control()
        || matches!(letter, '\u{200b}'..='\u{200f}' | '\u{202a}'..='\u{202e}' | '\u{2066}'..='\u{2069}' | '\u{feff}'))
        || matches!(letter, '\t' | '\n' | '\r')
}

fn glyph(face: &Face<'_>, letter: char) -> ttf_parser::GlyphId {
    face.glyph_index(relative(letter)).or_else(|| face.glyph_index('□')).unwrap_or_default()
}

/// Width of a text at a size.
pub(crate) fn width(text: &str, size: f64, weight: Weight) -> f64 {
    with_face(weight, 0.0, |face| {
        let scale = size / f64::from(face.units_per_em());
        let advance = |c| f64::from(face.glyph_hor_advance(glyph(face, c)).unwrap_or(0)) * scale;
        text.chars().filter(|&c| shows(c)).map(advance).sum()
    })
}

/// The outlines of a text whose baseline begins at a point.
pub(crate) fn outline(text: &str, x: f64, y: f64, size: f64, weight: Weight) -> Path {
    with_face(weight, Path::new(), |face| {
        let scale = size / f64::from(face.units_per_em());
        let mut writer = Writer { path: Path::new(), x, y, scale };
        for letter in text.chars().filter(|&c| shows(c)) {
            let id = glyph(face, letter);
            face.outline_glyph(id, &mut writer);
            writer.x += f64::from(face.glyph_hor_advance(id).unwrap_or(0)) * scale;
        }
        writer.path
    })
}

/// The text, shortened with an ellipsis until it is no wider than `most`.
pub(crate) fn fitted(text: &str, size: f64, weight: Weight, most: f64) -> String {
    if width(text, size, weight) <= most {
        return text.to_owned();
    }
    let mut kept: Vec<char> = text.chars().collect();
    while kept.pop().is_some() {
        let shortened = format!("{}…", kept.iter().collect::<String>().trim_end());
        if width(&shortened, size, weight) <= most {
            return shortened;
        }
    }
    String::new()
}

/// The text in lines no wider than `most`, broken at spaces; what does not fit into `lines` lines ends in an ellipsis. No lines for
/// an empty text.
pub(crate) fn wrapped(text: &str, size: f64, weight: Weight, most: f64, lines: usize) -> Vec<String> {
    let mut out: Vec<String> = Vec::new();
    for word in text.split_whitespace() {
        if let Some(last) = out.last_mut() {
            let longer = format!("{last} {word}");
            if width(&longer, size, weight) > most {
                out.push(word.to_owned());
            } else {
                *last = longer;
            }
        } else {
            out.push(word.to_owned());
        }
    }
    if out.len() > lines {
        let rest = out.split_off(lines.max(1) - 1).join(" ");
        out.push(rest);
    }
    out.iter().map(|line| fitted(line, size, weight, most)).collect()
}

struct Writer {
    path: Path,
    x: f64,
    y: f64,
    scale: f64,
}

impl Writer {
    fn place(&self, x: f32, y: f32) -> (f64, f64) {
        (self.x + f64::from(x) * self.scale, self.y - f64::from(y) * self.scale)
    }
}

impl OutlineBuilder for Writer {
    fn move_to(&mut self, x: f32, y: f32) {
        let p = self.place(x, y);
        self.path.to(p.0, p.1);
    }

    fn line_to(&mut self, x: f32, y: f32) {
        let p = self.place(x, y);
        self.path.line(p.0, p.1);
    }

    fn quad_to(&mut self, x1: f32, y1: f32, x: f32, y: f32) {
        let (a, b) = (self.place(x1, y1), self.place(x, y));
        self.path.quad(a, b);
    }

    fn curve_to(&mut self, x1: f32, y1: f32, x2: f32, y2: f32, x: f32, y: f32) {
        let (a, b, c) = (self.place(x1, y1), self.place(x2, y2), self.place(x, y));
        self.path.cubic(a, b, c);
    }

    fn close(&mut self) {
        self.path.close();
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Both files parse, and what physicists write is in them.
    #[test]
    fn the_font_has_the_letters_of_the_trade() {
        for weight in [Weight::Regular, Weight::Heavy] {
            let missing = with_face(weight, "no face".to_owned(), |face| {
                "Az09⁰⁻⁹₀₄□αβχξτ−×±∞√ÅħµKJ…–’".chars().filter(|&c| face.glyph_index(c).is_none()).collect()
            });
            assert_eq!(missing, "");
        }
    }

    #[test]
    fn texts_are_fitted() {
        assert_eq!(fitted("short", 12.0, Weight::Regular, 100.0), "short");
        let cut = fitted("a text that is far too long", 12.0, Weight::Regular, 60.0);
        assert!(cut.ends_with('…') && width(&cut, 12.0, Weight::Regular) <= 60.0, "{cut}");
        assert_eq!(fitted("text", 12.0, Weight::Regular, 1.0), "");
    }

    #[test]
    fn letters_of_other_scripts_are_drawn_as_missing() {
        assert!(!outline("שלום", 0.0, 0.0, 12.0, Weight::Regular).is_empty());
        assert_eq!(width("\u{202e}ab", 12.0, Weight::Regular), width("ab", 12.0, Weight::Regular));
    }
}
