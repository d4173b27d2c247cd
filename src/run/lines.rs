//! The lines of a file in chunks, so that tables of any length pass through little memory.

use std::fs::File;
use std::io::Read;
use std::path::Path;

/// Bytes of a chunk, to the end of its last line. About 500 rows of a catalogue.
const CHUNK: usize = 1 << 20;

/// Some lines of a file.
#[derive(Debug, PartialEq, Eq)]
pub struct Chunk {
    /// How many lines stand before them.
    pub first: usize,
    /// The lines, each with its end.
    pub text: String,
}

/// Reads a file chunk by chunk.
pub struct Chunks<R> {
    input: R,
    /// The beginning of a line whose end is not yet read.
    rest: Vec<u8>,
    size: usize,
    lines: usize,
    ended: bool,
}

impl Chunks<File> {
    /// Opens a file.
    ///
    /// # Errors
    /// Those of the system.
    pub fn open(path: &Path) -> std::io::Result<Self> {
        Ok(Chunks::new(File::open(path)?, CHUNK))
    }
}

impl<R: Read> Chunks<R> {
    fn new(input: R, size: usize) -> Self {
        Chunks { input, rest: Vec::new(), size, lines: 0, ended: false }
    }

    /// The next `n` chunks; fewer at the end of the file, none behind it.
    ///
    /// # Errors
    /// Those of the system, and text that is not UTF-8.
    pub fn some(&mut self, n: usize) -> std::io::Result<Vec<Chunk>> {
        let mut out = Vec::with_capacity(n);
        while out.len() < n
            && let Some(chunk) = self.one()?
        {
            out.push(chunk);
        }
        Ok(out)
    }

    fn one(&mut self) -> std::io::Result<Option<Chunk>> {
        let mut bytes = Vec::with_capacity(self.size + self.rest.len());
        bytes.append(&mut self.rest);
        let mut end = None;
        while end.is_none() && !self.ended {
            let from = bytes.len();
            let read = (&mut self.input).take(self.size as u64).read_to_end(&mut bytes)?;
            self.ended = read < self.size;
            end = bytes[from..].iter().rposition(|&b| b == b'\n').map(|i| from + i + 1);
        }
        if !self.ended {
            self.rest = bytes.split_off(end.unwrap_or(bytes.len()));
        }
        if bytes.is_empty() {
            return Ok(None);
        }
        let text = String::from_utf8(bytes).map_err(|e| std::io::Error::new(std::io::ErrorKind::InvalidData, e))?;
        let first = self.lines;
        self.lines += ends(text.as_bytes()) + usize::from(!text.ends_with('\n'));
        Ok(Some(Chunk { first, text }))
    }

    /// Lines read so far.
    pub fn lines(&self) -> usize {
        self.lines
    }
}

/// Line ends in a text, counted so that many bytes are compared at once.
fn ends(text: &[u8]) -> usize {
    text.chunks(255).map(|some| usize::from(some.iter().map(|&b| u8::from(b == b'\n')).sum::<u8>())).sum()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_line_comes_once_and_whole() {
        for text in ["", "\n", "a", "a\n", "one\ntwo\nthree\n", "one\n\n\ntwo", "a line longer than a chunk\nb\nä\n"] {
            for size in 1..12 {
                let mut chunks = Chunks::new(text.as_bytes(), size);
                let (mut joined, mut lines) = (String::new(), 0);
                loop {
                    let some = chunks.some(2).unwrap();
                    if some.is_empty() {
                        break;
                    }
                    for chunk in some {
                        assert_eq!(chunk.first, joined.lines().count());
                        assert!(chunk.text.ends_with('\n') || chunks.ended);
                        joined += &chunk.text;
                        lines += chunk.text.lines().count();
                    }
                }
                assert_eq!((joined.as_str(), lines), (text, text.lines().count()), "{size}");
                assert_eq!(chunks.lines(), lines);
            }
        }
    }

    #[test]
    fn what_is_no_text_is_refused() {
        assert!(Chunks::new(&b"a\n\xff\n"[..], 8).some(2).is_err());
    }
}
