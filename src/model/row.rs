//! One row of the catalogue in little memory: a bit a column, eight bytes a value that is there, words and counts packed.

use std::fmt;

use crate::model::columns::{COLUMNS, Col, Kind};
use crate::model::indicator::INDICATORS;

/// A value of a column: of its own, or (as a [`Cell`]) as it lies in a row.
#[derive(Debug, Clone, PartialEq, Default)]
pub enum Value<T = String, C = Vec<u64>> {
    /// Not measured.
    #[default]
    Missing,
    /// Words; an empty text is a value (no axes, no flags), not a missing one.
    Text(T),
    /// A whole number.
    Integer(i64),
    /// A number; never NaN or infinite.
    Number(f64),
    /// Counts a bin.
    Counts(C),
}

/// A value as it lies in a row.
pub type Cell<'a> = Value<&'a str, Counts<'a>>;

impl<T, C> Value<T, C> {
    /// A number where there is a finite one.
    pub fn number(v: Option<f64>) -> Self {
        v.filter(|v| v.is_finite()).map_or(Value::Missing, Value::Number)
    }

    /// The number, whole or not.
    pub fn as_f64(&self) -> Option<f64> {
        match self {
            Value::Number(v) => Some(*v),
            Value::Integer(v) => Some(*v as f64),
            _ => None,
        }
    }
}

impl<T: PartialEq, C: PartialEq> PartialEq<&Value<T, C>> for Value<T, C> {
    fn eq(&self, other: &&Value<T, C>) -> bool {
        *self == **other
    }
}

/// Counts as they lie in a row: seven bits a byte, the last byte of each below 128.
#[derive(Clone, Copy, PartialEq, Eq)]
pub struct Counts<'a>(&'a [u8]);

impl Iterator for Counts<'_> {
    type Item = u64;

    fn next(&mut self) -> Option<u64> {
        let mut value = 0;
        for (i, &byte) in self.0.iter().enumerate() {
            value |= u64::from(byte & 0x7f) << (7 * i);
            if byte < 0x80 {
                self.0 = &self.0[i + 1..];
                return Some(value);
            }
        }
        None
    }
}

impl fmt::Debug for Counts<'_> {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.debug_list().entries(*self).finish()
    }
}

/// Words of bits, one a column.
const WORDS: usize = 3;
const _: () = assert!(COLUMNS.len() + 3 * INDICATORS.len() <= 64 * WORDS);

/// Values for which room is made at a time: a row is to hold little that it does not need.
const ROOM: usize = 16;

/// What the values of every column of the registry are; those behind them are numbers.
const KINDS: [Kind; COLUMNS.len()] = {
    let mut kinds = [Kind::Number; COLUMNS.len()];
    let mut i = 0;
    while i < kinds.len() {
        kinds[i] = COLUMNS[i].kind();
        i += 1;
    }
    kinds
};

fn kind(column: usize) -> Kind {
    KINDS.get(column).copied().unwrap_or(Kind::Number)
}

/// One row of the catalogue: every column of the registry, then three for each companion (mean, smallest, largest).
#[derive(Clone)]
pub struct Row {
    /// Which columns have a value.
    there: [u64; WORDS],
    columns: u16,
    /// Their values in the order of columns: the bits of a number, or where its words or counts lie in `packed` (begin, length).
    cells: Vec<u64>,
    packed: Vec<u8>,
}

impl Default for Row {
    fn default() -> Self {
        Row { columns: COLUMNS.len() as u16, ..Row::empty() }
    }
}

impl Row {
    /// A row without columns, to be filled with [`Row::push`].
    pub fn empty() -> Row {
        Row { there: [0; WORDS], columns: 0, cells: Vec::new(), packed: Vec::new() }
    }

    /// Takes all columns off again and keeps the room.
    pub fn clear(&mut self) {
        self.there = [0; WORDS];
        self.columns = 0;
        self.cells.clear();
        self.packed.clear();
    }

    /// Adds the value of the next column.
    ///
    /// # Panics
    /// When the column holds other values, or there are as many columns as can be.
    pub fn push<T: AsRef<str>, C: AsRef<[u64]>>(&mut self, value: Value<T, C>) {
        let column = usize::from(self.columns);
        assert!(column < 64 * WORDS, "a row of more columns than there can be");
        self.columns += 1;
        self.put(column, value);
    }

    /// Sets a column.
    ///
    /// # Panics
    /// When the column holds other values.
    pub fn set(&mut self, column: Col, value: Value) {
        self.put(column as usize, value);
    }

    /// Sets a column to a number, missing where there is none.
    pub fn number(&mut self, column: Col, value: Option<f64>) {
        self.set(column, Value::number(value));
    }

    /// Adds the mean, the smallest and the largest value of the next companion.
    pub fn push_companion(&mut self, values: [Option<f64>; 3]) {
        values.into_iter().for_each(|v| self.push(Value::<String>::number(v)));
    }

    fn put<T: AsRef<str>, C: AsRef<[u64]>>(&mut self, column: usize, value: Value<T, C>) {
        let bits = match (kind(column), value) {
            (_, Value::Missing) => None,
            (Kind::Text, Value::Text(t)) => Some(self.pack(|packed| packed.extend_from_slice(t.as_ref().as_bytes()))),
            (Kind::Counts, Value::Counts(counts)) => Some(self.pack(|packed| push_counts(packed, counts.as_ref()))),
            (Kind::Integer, Value::Integer(v)) => Some(v as u64),
            (Kind::Number, Value::Number(v)) => Some(v.to_bits()),
            _ => panic!("a value of another kind in column {column}"),
        };
        let at = self.before(column);
        match (self.has(column), bits) {
            (true, Some(bits)) => self.cells[at] = bits,
            (true, None) => {
                self.cells.remove(at);
            }
            (false, Some(bits)) => {
                if self.cells.len() == self.cells.capacity() {
                    self.cells.reserve_exact(ROOM);
                }
                self.cells.insert(at, bits);
            }
            (false, None) => {}
        }
        let bit = 1 << (column % 64);
        let word = &mut self.there[column / 64];
        *word = if bits.is_some() { *word | bit } else { *word & !bit };
    }

    fn pack(&mut self, add: impl FnOnce(&mut Vec<u8>)) -> u64 {
        let begin = self.packed.len();
        add(&mut self.packed);
        (begin as u64) << 32 | (self.packed.len() - begin) as u64
    }

    fn has(&self, column: usize) -> bool {
        self.there[column / 64] >> (column % 64) & 1 == 1
    }

    /// How many columns before this one have a value.
    fn before(&self, column: usize) -> usize {
        let word = column / 64;
        let whole: u32 = self.there[..word].iter().map(|w| w.count_ones()).sum();
        let part = self.there[word] & ((1 << (column % 64)) - 1);
        (whole + part.count_ones()) as usize
    }

    /// A column.
    pub fn get(&self, column: Col) -> Cell<'_> {
        self.cell(column as usize)
    }

    /// The value of a column by its index, missing behind the last.
    pub fn cell(&self, column: usize) -> Cell<'_> {
        if column >= usize::from(self.columns) || !self.has(column) {
            return Cell::Missing;
        }
        self.decode(column, self.cells[self.before(column)])
    }

    fn decode(&self, column: usize, bits: u64) -> Cell<'_> {
        let packed = || {
            let begin = (bits >> 32) as usize;
            &self.packed[begin..begin + (bits & 0xffff_ffff) as usize]
        };
        match kind(column) {
            // What was packed was text.
            Kind::Text => Cell::Text(std::str::from_utf8(packed()).unwrap_or_default()),
            Kind::Counts => Cell::Counts(Counts(packed())),
            Kind::Integer => Cell::Integer(bits as i64),
            Kind::Number => Cell::Number(f64::from_bits(bits)),
        }
    }

    /// All values in the order of [`crate::model::schema::Schema::columns`], one after the other.
    pub fn iter(&self) -> impl Iterator<Item = Cell<'_>> {
        let mut at = 0;
        (0..usize::from(self.columns)).map(move |column| {
            if !self.has(column) {
                return Cell::Missing;
            }
            at += 1;
            self.decode(column, self.cells[at - 1])
        })
    }

    /// All values in the order of [`crate::model::schema::Schema::columns`].
    pub fn values(&self) -> Vec<Cell<'_>> {
        self.iter().collect()
    }

    /// Bytes of memory that it takes.
    pub fn bytes(&self) -> usize {
        size_of::<Row>() + self.cells.capacity() * size_of::<u64>() + self.packed.capacity()
    }
}

/// Two rows are the same when their values are, in whatever order they were set.
impl PartialEq for Row {
    fn eq(&self, other: &Row) -> bool {
        self.columns == other.columns && self.there == other.there && self.iter().eq(other.iter())
    }
}

impl fmt::Debug for Row {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.debug_list().entries(self.iter()).finish()
    }
}

fn push_counts(packed: &mut Vec<u8>, counts: &[u64]) {
    for &count in counts {
        let mut rest = count;
        while rest >= 0x80 {
            packed.push(rest as u8 | 0x80);
            rest >>= 7;
        }
        packed.push(rest as u8);
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn values_are_what_was_set_last_in_any_order() {
        let mut r = Row::default();
        r.set(Col::HistogramUB, Value::Counts(vec![0, 127, 128, u64::MAX]));
        r.number(Col::Time, Some(0.25));
        r.set(Col::Flags, Value::Text("wraps".into()));
        r.set(Col::Cells, Value::Integer(i64::MIN));
        r.set(Col::Wraps, Value::Text(String::new()));
        r.number(Col::Level, Some(f64::NAN));
        r.set(Col::Flags, Value::Text("no_time".into()));
        r.number(Col::Time, None);
        r.push_companion([Some(-0.0), None, Some(2.0)]);
        assert_eq!(r.get(Col::Flags), Cell::Text("no_time"));
        assert_eq!(r.get(Col::Wraps), Cell::Text(""));
        assert_eq!((r.get(Col::Time), r.get(Col::Level)), (Cell::Missing, Cell::Missing));
        assert_eq!(r.get(Col::Cells), Cell::Integer(i64::MIN));
        let Cell::Counts(counts) = r.get(Col::HistogramUB) else { panic!("counts are there") };
        assert_eq!(counts.collect::<Vec<_>>(), [0, 127, 128, u64::MAX]);
        assert_eq!(r.values()[COLUMNS.len()..], [Cell::Number(-0.0), Cell::Missing, Cell::Number(2.0)]);
        assert_eq!(r.values().len(), COLUMNS.len() + 3);
        let each: Vec<_> = (0..COLUMNS.len() + 3).map(|i| r.cell(i)).collect();
        assert_eq!(each, r.values());

        let mut other = Row::default();
        other.set(Col::Cells, Value::Integer(i64::MIN));
        other.set(Col::Wraps, Value::Text(String::new()));
        other.set(Col::Flags, Value::Text("no_time".into()));
        other.set(Col::HistogramUB, Value::Counts(vec![0, 127, 128, u64::MAX]));
        assert_ne!(other, r);
        other.push_companion([Some(-0.0), None, Some(2.0)]);
        assert_eq!(other, r);
        other.set(Col::Cells, Value::Integer(1));
        assert_ne!(other, r);
    }

    #[test]
    fn a_row_with_every_column_takes_less_than_a_kibibyte() {
        let mut r = Row::default();
        for (i, c) in COLUMNS.iter().enumerate() {
            match c.kind() {
                Kind::Text => r.put(i, Value::<_>::Text("a dozen letters".to_string())),
                Kind::Integer => r.put(i, Value::<String>::Integer(1 << 40)),
                Kind::Number => r.put(i, Value::<String>::Number(0.1)),
                Kind::Counts => r.put(i, Value::<String>::Counts(vec![100; 20])),
            }
        }
        assert!(r.values().iter().all(|v| *v != Cell::Missing));
        assert!(r.bytes() < 1024 + 128 && r.clone().bytes() < 1024, "{} {}", r.bytes(), r.clone().bytes());
    }
}
