//! What happens at the ends of a direction.

use spinledger_sdk::{Error, Parameter, Result};

/// Boundary of a direction.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Boundary {
    /// The last cell is followed by the first.
    Periodic,
    /// Nothing follows.
    Free,
    /// Sites pinned up follow.
    Plus,
    /// Sites pinned down follow.
    Minus,
    /// The first cell follows, its spins seen with opposite sign.
    Antiperiodic,
}

impl Boundary {
    /// Whether the direction closes on itself.
    pub(crate) fn is_periodic(self) -> bool {
        matches!(self, Boundary::Periodic | Boundary::Antiperiodic)
    }

    /// Where the sites beyond the end point to, if there are any.
    pub(crate) fn pinned_direction(self) -> Option<i32> {
        match self {
            Boundary::Plus => Some(1),
            Boundary::Minus => Some(-1),
            _ => None,
        }
    }
}

/// The boundary of a word.
///
/// # Errors
/// Where it is none of the words.
pub(crate) fn parse(word: &str) -> Result<Boundary> {
    Ok(match word {
        "periodic" => Boundary::Periodic,
        "free" => Boundary::Free,
        "plus" => Boundary::Plus,
        "minus" => Boundary::Minus,
        "antiperiodic" => Boundary::Antiperiodic,
        _ => return Err(Error::new(format!("`{word}` is not a boundary: periodic, free, plus, minus, antiperiodic"))),
    })
}

/// The parameter `size`, its kind depending on the number of directions.
pub(crate) const fn size_parameter(kind: &'static str) -> Parameter {
    Parameter::required("size", kind, "unit cells in each direction: a whole number, or a list with one for each")
}

/// The parameter `boundary`, its kind depending on the number of directions.
pub(crate) const fn boundary_parameter(kind: &'static str) -> Parameter {
    Parameter::optional(
        "boundary",
        kind,
        r#""periodic""#,
        "periodic, free, plus or minus (the rim outside is pinned up or down), antiperiodic; one word, or a list with one for each direction",
    )
}

/// Kinds of `size` and `boundary` for one direction ...
pub(crate) const SIZE_1: &str =
    r#"{"either":{"of":[{"integer":{"min":1}},{"list":{"of":{"integer":{"min":1}},"min":1,"max":1}}]}}"#;
/// ... two ...
pub(crate) const SIZE_2: &str =
    r#"{"either":{"of":[{"integer":{"min":1}},{"list":{"of":{"integer":{"min":1}},"min":2,"max":2}}]}}"#;
/// ... and three.
pub(crate) const SIZE_3: &str =
    r#"{"either":{"of":[{"integer":{"min":1}},{"list":{"of":{"integer":{"min":1}},"min":3,"max":3}}]}}"#;

macro_rules! boundary_kind {
    ($directions:literal) => {
        concat!(
            r#"{"either":{"of":[{"word":{"of":["periodic","free","plus","minus","antiperiodic"]}},{"list":{"of":"#,
            r#"{"word":{"of":["periodic","free","plus","minus","antiperiodic"]}},"min":"#,
            $directions,
            r#","max":"#,
            $directions,
            "}}]}}"
        )
    };
}

/// See [`SIZE_1`].
pub(crate) const BOUNDARY_1: &str = boundary_kind!(1);
/// See [`SIZE_2`].
pub(crate) const BOUNDARY_2: &str = boundary_kind!(2);
/// See [`SIZE_3`].
pub(crate) const BOUNDARY_3: &str = boundary_kind!(3);
