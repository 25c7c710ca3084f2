//! Where a node stands in the text.

use serde::de::{DeserializeSeed, Deserializer, EnumAccess, IgnoredAny, MapAccess, SeqAccess, VariantAccess, Visitor};
use spinledger_terms::Mark;
use std::fmt;

/// The byte offset of the node that `route` leads to (or of its key). None where the route leads nowhere. For a node that came
/// through an alias this is the place of the anchored original.
///
/// Cost: one run of the parser over the text.
pub(crate) fn offset(text: &str, route: &[usize], mark: Mark) -> Option<usize> {
    let document = serde_yaml::Deserializer::from_str(text).next()?;
    let error = Descend { route, mark }.deserialize(document).err()?;
    error.location().map(|location| location.index())
}

/// Goes down the route, skipping siblings without expanding their aliases, and fails at its end: errors carry places.
struct Descend<'a> {
    route: &'a [usize],
    mark: Mark,
}

impl<'de> DeserializeSeed<'de> for Descend<'_> {
    type Value = ();

    fn deserialize<D: Deserializer<'de>>(self, deserializer: D) -> Result<(), D::Error> {
        if self.route.is_empty() { deserializer.deserialize_any(Stop) } else { deserializer.deserialize_any(self) }
    }
}

impl<'de> Visitor<'de> for Descend<'_> {
    type Value = ();

    fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str("a list or a mapping")
    }

    fn visit_seq<A: SeqAccess<'de>>(self, mut items: A) -> Result<(), A::Error> {
        let Some((&index, rest)) = self.route.split_first() else { return Ok(()) };
        for _ in 0..index {
            items.next_element::<IgnoredAny>()?;
        }
        items.next_element_seed(Descend { route: rest, mark: self.mark })?;
        while items.next_element::<IgnoredAny>()?.is_some() {}
        Ok(())
    }

    fn visit_map<A: MapAccess<'de>>(self, mut entries: A) -> Result<(), A::Error> {
        let Some((&index, rest)) = self.route.split_first() else { return Ok(()) };
        for _ in 0..index {
            entries.next_entry::<IgnoredAny, IgnoredAny>()?;
        }
        if rest.is_empty() && self.mark == Mark::Key {
            entries.next_key_seed(Descend { route: &[], mark: Mark::Value })?;
            return Ok(());
        }
        if entries.next_key::<IgnoredAny>()?.is_some() {
            entries.next_value_seed(Descend { route: rest, mark: self.mark })?;
        }
        while entries.next_entry::<IgnoredAny, IgnoredAny>()?.is_some() {}
        Ok(())
    }

    fn visit_enum<A: EnumAccess<'de>>(self, tagged: A) -> Result<(), A::Error> {
        let (IgnoredAny, content) = tagged.variant()?;
        content.newtype_variant_seed(self)
    }
}

/// Takes nothing, so that whatever stands there is an error with a place.
struct Stop;

impl Visitor<'_> for Stop {
    type Value = ();

    fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str("a place")
    }
}

/// The place of the first node of the second document, if there is one.
pub(super) fn second_document(text: &str) -> Option<usize> {
    let document = serde_yaml::Deserializer::from_str(text).nth(1)?;
    let error = document.deserialize_any(Stop).err();
    Some(error.and_then(|e| e.location()).map_or(0, |location| location.index()))
}
