//! The Arrow schema that Parquet files carry in their metadata as `ARROW:schema`, so that readers built on Arrow show each
//! column's unit in the metadata of its field.
//!
//! The text is base64 of an encapsulated message of the Arrow IPC format (Arrow columnar format 1.x, "Encapsulated message
//! format" and Schema.fbs): a continuation marker, a length, and a FlatBuffers table `Message` holding a `Schema`. Only what
//! such a schema needs is written here, front to back: a table is followed by what it refers to.

use super::format::{ColumnInfo, Kind};

const VERSION_5: i16 = 4;
const HEADER_SCHEMA: u8 = 1;
const TYPE_INT: u8 = 2;
const TYPE_FLOATING_POINT: u8 = 3;
const TYPE_UTF8: u8 = 5;
const TYPE_BOOL: u8 = 6;
const PRECISION_DOUBLE: i16 = 2;

/// The value of `ARROW:schema` for columns in a file with some more metadata, which has to be repeated in it: readers show
/// the schema's metadata in place of the file's.
pub(super) fn schema_text(columns: &[ColumnInfo], metadata: &[(&str, &str)]) -> String {
    let message = message(columns, metadata);
    let mut bytes = vec![0xff; 4];
    bytes.extend_from_slice(&(message.len() as u32).to_le_bytes());
    bytes.extend_from_slice(&message);
    base64(&bytes)
}

fn message(columns: &[ColumnInfo], metadata: &[(&str, &str)]) -> Vec<u8> {
    let mut out = Flat(vec![0; 4]);
    let message = out.table(&[Slot::I16(VERSION_5), Slot::U8(HEADER_SCHEMA), Slot::Ref]);
    out.point(0, message.start);
    let schema = out.table(&[Slot::Default, Slot::Ref, Slot::Ref]);
    out.point(message.slots[2], schema.start);
    let fields = out.vector(columns.len());
    out.point(schema.slots[1], fields);
    for (i, column) in columns.iter().enumerate() {
        let start = out.field(column);
        out.point(fields + 4 + 4 * i, start);
    }
    out.pairs(schema.slots[2], metadata);
    out.align(8);
    out.0
}

/// A field of a table: its value, or room for where the value stands.
#[derive(Clone, Copy)]
enum Slot {
    Default,
    U8(u8),
    I16(i16),
    I32(i32),
    Ref,
}

impl Slot {
    fn size(self) -> usize {
        match self {
            Slot::Default => 0,
            Slot::U8(_) => 1,
            Slot::I16(_) => 2,
            Slot::I32(_) | Slot::Ref => 4,
        }
    }
}

/// Where a table and its fields stand.
struct Placed {
    start: usize,
    slots: Vec<usize>,
}

struct Flat(Vec<u8>);

impl Flat {
    /// A column as a `Field` with its type and unit.
    fn field(&mut self, column: &ColumnInfo) -> usize {
        let (tag, kind): (u8, &[Slot]) = match column.kind {
            Kind::Integer => (TYPE_INT, &[Slot::I32(64), Slot::U8(1)]),
            Kind::Number => (TYPE_FLOATING_POINT, &[Slot::I16(PRECISION_DOUBLE)]),
            Kind::Boolean => (TYPE_BOOL, &[]),
            Kind::Text => (TYPE_UTF8, &[]),
        };
        // Name, nullable, type tag, type, dictionary, children, metadata.
        let nullable = Slot::U8(1);
        let slots = [Slot::Ref, nullable, Slot::U8(tag), Slot::Ref, Slot::Default, Slot::Ref, Slot::Ref];
        let field = self.table(&slots);
        let name = self.string(&column.name);
        self.point(field.slots[0], name);
        let kind = self.table(kind).start;
        self.point(field.slots[3], kind);
        // Readers demand the list of children even where there are none.
        let children = self.vector(0);
        self.point(field.slots[5], children);
        self.pairs(field.slots[6], &[("unit", &column.unit)]);
        field.start
    }

    /// Metadata: keys and values.
    fn pairs(&mut self, room: usize, pairs: &[(&str, &str)]) {
        let vector = self.vector(pairs.len());
        self.point(room, vector);
        for (i, (key, value)) in pairs.iter().enumerate() {
            let pair = self.table(&[Slot::Ref, Slot::Ref]);
            self.point(vector + 4 + 4 * i, pair.start);
            for (slot, text) in pair.slots.into_iter().zip([key, value]) {
                let text = self.string(text);
                self.point(slot, text);
            }
        }
    }

    /// A table after its vtable. Fields stand in order of size, so that each is aligned.
    fn table(&mut self, slots: &[Slot]) -> Placed {
        let mut offsets = vec![0u16; slots.len()];
        let mut length = 4u16;
        for size in [4, 2, 1] {
            for (offset, slot) in offsets.iter_mut().zip(slots) {
                if slot.size() == size {
                    *offset = length;
                    length += size as u16;
                }
            }
        }
        let header = 4 + 2 * slots.len();
        while !(self.0.len() + header).is_multiple_of(4) {
            self.0.push(0);
        }
        for word in [header as u16, length].iter().chain(&offsets) {
            self.0.extend_from_slice(&word.to_le_bytes());
        }
        let start = self.0.len();
        self.0.extend_from_slice(&(header as i32).to_le_bytes());
        self.0.resize(start + usize::from(length), 0);
        let places: Vec<usize> = offsets.iter().map(|offset| start + usize::from(*offset)).collect();
        for (slot, place) in slots.iter().zip(&places) {
            match slot {
                Slot::U8(value) => self.0[*place] = *value,
                Slot::I16(value) => self.0[*place..*place + 2].copy_from_slice(&value.to_le_bytes()),
                Slot::I32(value) => self.0[*place..*place + 4].copy_from_slice(&value.to_le_bytes()),
                Slot::Default | Slot::Ref => {}
            }
        }
        Placed { start, slots: places }
    }

    /// A vector with room for references.
    fn vector(&mut self, length: usize) -> usize {
        self.align(4);
        let start = self.0.len();
        self.0.extend_from_slice(&(length as u32).to_le_bytes());
        self.0.resize(start + 4 + 4 * length, 0);
        start
    }

    fn string(&mut self, text: &str) -> usize {
        self.align(4);
        let start = self.0.len();
        self.0.extend_from_slice(&(text.len() as u32).to_le_bytes());
        self.0.extend_from_slice(text.as_bytes());
        self.0.push(0);
        start
    }

    /// Fills the room for a reference, which counts from itself.
    fn point(&mut self, room: usize, target: usize) {
        self.0[room..room + 4].copy_from_slice(&((target - room) as u32).to_le_bytes());
    }

    fn align(&mut self, to: usize) {
        self.0.resize(self.0.len().next_multiple_of(to), 0);
    }
}

fn base64(bytes: &[u8]) -> String {
    const DIGITS: &[u8; 64] = b"ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz0123456789+/";
    let mut text = String::with_capacity(bytes.len().div_ceil(3) * 4);
    for chunk in bytes.chunks(3) {
        let word = (0..3).fold(0u32, |word, i| word << 8 | u32::from(chunk.get(i).copied().unwrap_or(0)));
        for i in 0..4 {
            let digit = DIGITS[(word >> (18 - 6 * i)) as usize & 63];
            text.push(if i <= chunk.len() { char::from(digit) } else { '=' });
        }
    }
    text
}

#[cfg(test)]
mod tests {
    use super::*;

    /// RFC 4648, section 10.
    #[test]
    fn base64_has_the_known_values() {
        for (text, expected) in [("", ""), ("f", "Zg=="), ("fo", "Zm8="), ("foo", "Zm9v"), ("foobar", "Zm9vYmFy")] {
            assert_eq!(base64(text.as_bytes()), expected);
        }
    }

    /// Follows references the way a reader does.
    struct Reader<'a>(&'a [u8]);

    impl Reader<'_> {
        fn u16(&self, at: usize) -> usize {
            usize::from(u16::from_le_bytes([self.0[at], self.0[at + 1]]))
        }
        fn u32(&self, at: usize) -> usize {
            assert_eq!(at % 4, 0, "aligned");
            u32::from_le_bytes(self.0[at..at + 4].try_into().unwrap()) as usize
        }
        fn follow(&self, at: usize) -> usize {
            at + self.u32(at)
        }
        fn slot(&self, table: usize, slot: usize) -> usize {
            let vtable = table - self.u32(table);
            assert!(4 + 2 * slot < self.u16(vtable), "slot {slot} is there");
            let offset = self.u16(vtable + 4 + 2 * slot);
            assert!(offset >= 4 && offset < self.u16(vtable + 2), "slot {slot} is inside the table");
            table + offset
        }
        fn text(&self, at: usize) -> &str {
            let start = self.follow(at);
            let length = self.u32(start);
            assert_eq!(self.0[start + 4 + length], 0, "ends in NUL");
            std::str::from_utf8(&self.0[start + 4..start + 4 + length]).unwrap()
        }
    }

    #[test]
    fn a_reader_finds_names_types_and_units() {
        let column = |name: &str, unit: &str, kind| ColumnInfo { name: name.into(), unit: unit.into(), kind };
        let columns = [
            column("sweep", "sweeps", Kind::Integer),
            column("energy", "J", Kind::Number),
            column("flags", "", Kind::Text),
            column("équilibré", "µ", Kind::Boolean),
        ];
        let bytes = message(&columns, &[("spinledger.key", "00")]);
        assert_eq!(bytes.len() % 8, 0);
        let r = Reader(&bytes);
        let root = r.follow(0);
        assert_eq!((r.u16(r.slot(root, 0)), bytes[r.slot(root, 1)]), (4, 1));
        let schema = r.follow(r.slot(root, 2));
        let pair = r.follow(r.follow(r.slot(schema, 2)) + 4);
        assert_eq!((r.text(r.slot(pair, 0)), r.text(r.slot(pair, 1))), ("spinledger.key", "00"));
        let fields = r.follow(r.slot(schema, 1));
        assert_eq!(r.u32(fields), columns.len());
        for (i, column) in columns.iter().enumerate() {
            let field = r.follow(fields + 4 + 4 * i);
            assert_eq!(r.text(r.slot(field, 0)), column.name);
            let tag = [TYPE_INT, TYPE_FLOATING_POINT, TYPE_UTF8, TYPE_BOOL][i];
            assert_eq!((bytes[r.slot(field, 1)], bytes[r.slot(field, 2)]), (1, tag));
            assert_eq!(r.u32(r.follow(r.slot(field, 5))), 0);
            let pair = r.follow(r.follow(r.slot(field, 6)) + 4);
            assert_eq!((r.text(r.slot(pair, 0)), r.text(r.slot(pair, 1))), ("unit", column.unit.as_str()));
            let kind = r.follow(r.slot(field, 3));
            match column.kind {
                Kind::Integer => assert_eq!((r.u32(r.slot(kind, 0)), bytes[r.slot(kind, 1)]), (64, 1)),
                Kind::Number => assert_eq!(r.u16(r.slot(kind, 0)), 2),
                _ => assert_eq!(r.u16(kind - r.u32(kind)), 4, "no fields"),
            }
        }
    }
}
