//! Files without a header: all components in one file, or one file a component, as a layout says.

use std::fs::File;
use std::path::{Path, PathBuf};

use crate::base::error::{Error, Result};
use crate::read::arrange::{Slots, check_samples};
use crate::read::header::{Header, Precision, shape_text};
use crate::read::names::{Choice, Field, GUESSES, HINT, PLACE, choose, has_place, has_vector, named, with_name};
use crate::read::order::{Axes, End, Order};
use crate::read::raw::RawArray;
use crate::read::records::{Record, records};
use crate::read::source::{Array, Arrays, Store};
use crate::read::spec::{InputSpec, RawLayout};

const WHAT: &str = "cannot read the file without a header";

/// Opens the file, or the files of a path with a place for the component's name.
pub(super) fn open(path: &Path, spec: &InputSpec, layout: &RawLayout, order: &Order) -> Result<Arrays> {
    let reader = Reader { layout, order };
    if has_place(path) { reader.many(path, spec) } else { reader.one(path, spec) }
}

struct Reader<'a> {
    layout: &'a RawLayout,
    order: &'a Order,
}

/// How many components a file may have, and the fields that they make up.
struct Parts(Vec<(Choice, usize)>);

impl Parts {
    fn components(&self) -> usize {
        self.0.iter().map(|(_, n)| n).sum()
    }

    /// One name a component.
    fn labels(&self) -> Vec<String> {
        let of = |(choice, n): &(Choice, usize)| -> Vec<String> {
            let names = &choice.1;
            if names.len() == *n { names.clone() } else { (0..*n).map(|c| format!("{}[{c}]", names[0])).collect() }
        };
        self.0.iter().flat_map(of).collect()
    }
}

impl Reader<'_> {
    /// All components in one file.
    fn one(&self, path: &Path, spec: &InputSpec) -> Result<Arrays> {
        let length = size_of(path, HINT)?;
        let all = self.divisions(spec);
        let counts: Vec<usize> = all.iter().map(Parts::components).collect();
        let found = self.contents(path, length, &counts)?;
        let Some((parts, stretches)) = all.into_iter().zip(found).find_map(|(p, f)| f.map(|f| (p, f))) else {
            return Err(self.wrong_size(path, length, &counts));
        };
        let arrays = self.arrays(path, &stretches, &parts.labels())?;
        let fields: Vec<(Field, Vec<usize>)> = parts.0.iter().map(|((f, _), n)| (*f, vec![1; *n])).collect();
        let mut slots = Slots::new(&fields);
        if arrays.len() == 1 {
            slots.places = vec![slots.places.concat()];
        }
        self.together(arrays, slots)
    }

    /// One file a component, or a field.
    fn many(&self, path: &Path, spec: &InputSpec) -> Result<Arrays> {
        let bytes = self.layout.bytes();
        let shape = |name: &str| {
            let length = std::fs::metadata(with_name(path, name)).ok().filter(|m| m.is_file())?.len();
            let mut shape = self.layout.shape.clone();
            if length >= 2 * bytes {
                shape.insert(0, (length / bytes).min(3) as usize);
            }
            Some(shape)
        };
        let choices = choose(spec, shape).map_err(|e| e.at(path))?;
        if !has_vector(&choices) {
            return Err(Error::input("cannot find a velocity or magnetic field")
                .at(path)
                .expected(format!("files with {GUESSES} in place of {PLACE}"))
                .found("none of them")
                .hint(HINT));
        }
        let (mut arrays, mut fields) = (Vec::new(), Vec::new());
        for choice in &choices {
            let (field, names) = choice;
            let mut sizes = Vec::new();
            for name in names {
                let file = with_name(path, name);
                let length = size_of(&file, field.hint())?;
                let counts = if names.len() > 1 || !field.is_vector() { vec![1] } else { self.vector_counts() };
                let found = self.contents(&file, length, &counts)?;
                let Some((n, stretches)) = counts.iter().zip(found).find_map(|(n, f)| f.map(|f| (*n, f))) else {
                    return Err(self.wrong_size(&file, length, &counts));
                };
                let labels: Vec<String> = if n == 1 { vec![name.clone()] } else { (0..n).map(|c| format!("{name}[{c}]")).collect() };
                let own = self.arrays(&file, &stretches, &labels)?;
                sizes.extend(own.iter().map(|a| a.axes.components));
                arrays.extend(own);
            }
            fields.push((*field, sizes));
        }
        self.together(arrays, Slots::new(&fields))
    }

    fn together(&self, arrays: Vec<Array>, slots: Slots) -> Result<Arrays> {
        let axes = Axes::new(&self.letters(), None, 1);
        let shape = axes.full(&self.layout.shape);
        let samples = axes.space.map(|a| shape[a]);
        for a in &arrays {
            check_samples(&a.header, samples)?;
        }
        Ok(Arrays::new(arrays, slots, samples))
    }

    fn letters(&self) -> String {
        self.order.letters_of(self.layout.shape.len()).expect("checked with the description")
    }

    /// Components of a vector field: on a plane it may have two.
    fn vector_counts(&self) -> Vec<usize> {
        let axes = Axes::new(&self.letters(), None, 1);
        if axes.full(&self.layout.shape)[axes.space[2]] == 1 { vec![3, 2] } else { vec![3] }
    }

    /// What one file may hold: the fields named, or a velocity, or velocity and magnetic field.
    fn divisions(&self, spec: &InputSpec) -> Vec<Parts> {
        let mut rest = named(spec);
        let usual = |field, names: [&str; 3]| (field, names.map(String::from).to_vec());
        let sets: Vec<Vec<Choice>> = if has_vector(&rest) {
            vec![std::mem::take(&mut rest)]
        } else {
            let velocity = usual(Field::Velocity, ["u", "v", "w"]);
            vec![vec![velocity.clone()], vec![velocity, usual(Field::Magnetic, ["bx", "by", "bz"])]]
        };
        let mut out = Vec::new();
        for n in self.vector_counts() {
            for set in &sets {
                let guessed = spec.velocity.is_none() && spec.magnetic.is_none();
                let parts = set.iter().chain(&rest).map(|(field, names)| {
                    let (mut names, mut count) = (names.clone(), names.len());
                    if field.is_vector() && guessed {
                        names.truncate(n);
                        count = n;
                    } else if field.is_vector() && names.len() == 1 {
                        count = n;
                    }
                    ((*field, names), count)
                });
                out.push(Parts(parts.collect()));
            }
        }
        out
    }

    /// For every number of components where they would be, if the file has as many.
    fn contents(&self, path: &Path, length: u64, counts: &[usize]) -> Result<Vec<Option<Stretches>>> {
        let bytes = self.layout.bytes();
        let offset = self.layout.offset;
        let Some(marker) = self.layout.record_markers else {
            let fits = |&n: &usize| (offset.checked_add(n as u64 * bytes) == Some(length)).then_some(Stretches::Plain);
            return Ok(counts.iter().map(fits).collect());
        };
        if length <= offset {
            return Ok(vec![None; counts.len()]);
        }
        let mut allowed = vec![bytes];
        allowed.extend(counts.iter().map(|&n| n as u64 * bytes));
        allowed.dedup();
        let found = records(path, offset, marker, self.layout.big_endian, &allowed).map_err(|e| {
            // A file that fits without markers has none.
            if counts.iter().any(|&n| offset + n as u64 * bytes == length) {
                e.hint("its size fits a file without record markers")
            } else {
                e
            }
        })?;
        let fits = |&n: &usize| match &found[..] {
            [all] if all.bytes == n as u64 * bytes => Some(Stretches::Together(all.clone())),
            each if each.len() == n && each.iter().all(|r| r.bytes == bytes) => Some(Stretches::Each(each.to_vec())),
            _ => None,
        };
        let found: Vec<Option<Stretches>> = counts.iter().map(fits).collect();
        Ok(found)
    }

    /// The arrays of a file: one a component, or one of all where the components come last.
    fn arrays(&self, path: &Path, stretches: &Stretches, labels: &[String]) -> Result<Vec<Array>> {
        let file = path.file_name().unwrap_or_default().to_string_lossy();
        let precision = if self.layout.double { Precision::F64 } else { Precision::F32 };
        let (n, bytes) = (labels.len(), self.layout.bytes());
        let last = self.order.component == Some(End::Last) && n > 1;
        if last && matches!(stretches, Stretches::Each(_)) {
            return Err(Error::usage(WHAT)
                .at(path)
                .item("--order")
                .expected("components in one record where c comes last")
                .found(format!("{n} records"))
                .hint("every component has a record of its own: drop the c"));
        }
        let mut arrays = Vec::new();
        for c in 0..if last { 1 } else { n } {
            let plain = File::open(path).map_err(|e| Error::input(WHAT).at(path).found(e.to_string()))?;
            let mut shape = self.layout.shape.clone();
            let label = if last || n == 1 { file.to_string() } else { format!("{file}:{}", labels[c]) };
            let axes = if last {
                shape.push(n);
                Axes::new(&self.letters(), Some(End::Last), n)
            } else {
                Axes::new(&self.letters(), None, 1)
            };
            let item = (!last && n > 1).then(|| labels[c].clone());
            let header = Header { path: path.into(), item, label, shape: axes.full(&shape), precision };
            let own = c as u64 * bytes;
            let array = |offset| RawArray::new(header.clone(), plain, offset, self.layout.big_endian);
            let array = match stretches {
                Stretches::Plain => array(self.layout.offset + own),
                Stretches::Together(record) => array(own).in_pieces(record.pieces.clone()),
                Stretches::Each(all) => array(0).in_pieces(all[c].pieces.clone()),
            };
            arrays.push(Array { header, axes, store: Store::Raw(array), depth: 1, filtered: false });
        }
        Ok(arrays)
    }

    fn wrong_size(&self, path: &Path, length: u64, counts: &[usize]) -> Error {
        let bytes = self.layout.bytes();
        let mut wanted: Vec<String> = counts.iter().map(|&n| (self.layout.offset + n as u64 * bytes).to_string()).collect();
        wanted.dedup();
        let names: Vec<String> = counts.iter().map(usize::to_string).collect();
        let error = Error::input(WHAT)
            .at(path)
            .expected(format!(
                "{} bytes{} ({} components of {} float{} values)",
                wanted.join(" or "),
                if self.layout.record_markers.is_some() { " and record markers" } else { "" },
                names.join(" or "),
                shape_text(&self.layout.shape),
                8 * self.layout.width(),
            ))
            .found(length.to_string());
        error.hint(self.what_fits(length, counts).unwrap_or_else(|| "check shape, precision and offset".into()))
    }

    /// The nearest layout whose size is that of the file.
    fn what_fits(&self, length: u64, counts: &[usize]) -> Option<String> {
        let cells = self.layout.bytes() / self.layout.width();
        let mut best: Option<(usize, String)> = None;
        let other_counts: Vec<usize> = counts.iter().copied().chain([1, 2, 3, 4, 6, 7, 8]).collect();
        for width in [self.layout.width(), 12 - self.layout.width()] {
            for marker in [None, Some(4u8), Some(8)] {
                for &n in &other_counts {
                    let bytes = n as u64 * cells * width + self.layout.offset;
                    let markers = 2 * u64::from(marker.unwrap_or(0));
                    if length != bytes + markers && length != bytes + n as u64 * markers {
                        continue;
                    }
                    let mut said = Vec::new();
                    if width != self.layout.width() {
                        said.push(format!("float{}", 8 * width));
                    }
                    if marker != self.layout.record_markers {
                        said.push(marker.map_or("no record markers".into(), |m| format!("{m}-byte record markers")));
                    }
                    if !counts.contains(&n) {
                        said.push(if n == 1 { "1 component".into() } else { format!("{n} components") });
                    }
                    if !said.is_empty() && best.as_ref().is_none_or(|(least, _)| said.len() < *least) {
                        best = Some((said.len(), format!("{} would fit", said.join(" and "))));
                    }
                }
            }
        }
        if best.is_some() || self.layout.record_markers.is_some() {
            return best.map(|b| b.1);
        }
        let without = counts.iter().map(|&n| n as u64 * self.layout.bytes()).filter(|&b| b < length).max()?;
        (length - without <= 1 << 20).then(|| format!("an offset of {} bytes would fit", length - without))
    }
}

/// Where the components of a file stand.
#[derive(Debug, Clone)]
enum Stretches {
    /// One behind the other from the offset on.
    Plain,
    /// All in one record.
    Together(Record),
    /// Each in its own.
    Each(Vec<Record>),
}

fn size_of(path: &Path, hint: &str) -> Result<u64> {
    let path: PathBuf = path.into();
    match std::fs::metadata(&path) {
        Ok(m) if m.is_file() => Ok(m.len()),
        Ok(_) => Err(Error::input(WHAT).at(&path).expected("a file").found("a folder or device")),
        Err(e) if e.kind() == std::io::ErrorKind::NotFound => {
            Err(Error::input("cannot find the file").at(&path).found("nothing").hint(hint))
        }
        Err(e) => Err(Error::input(WHAT).at(&path).found(e.to_string())),
    }
}
