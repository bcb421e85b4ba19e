//! The header of `samples.npy`: NumPy's array format 1.0 (NEP 1, `numpy.lib.format`), so that
//! samples load in NumPy as they are.
//!
//! Only one kind of array is known here: bytes (`|u1`) in C order, one row per sample. The header
//! is byte for byte the one that `numpy.save` writes, and no other is taken: the header follows
//! from the shape, which makes reading a matter of comparing.

use crate::error::{Error, ErrorKind, Result};

/// The length of the header. NumPy pads to a multiple of 64, and every shape of ours comes to this.
pub const HEADER_BYTES: u64 = 128;

/// Magic string, version 1.0 and the length of what follows (u16, little-endian): 128 - 10.
const PREAMBLE: [u8; 10] = *b"\x93NUMPY\x01\x00\x76\x00";

const BEFORE_SHAPE: &str = "{'descr': '|u1', 'fortran_order': False, 'shape': (";

/// The shape of an array of samples.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct Shape {
    rows: u64,
    row_bytes: u64,
}

impl Shape {
    /// So many samples of so many bytes.
    ///
    /// # Errors
    /// `Value` for samples without bytes, `TooLarge` if the file would be longer than 2^63 - 1 bytes.
    pub fn new(rows: u64, row_bytes: u64) -> Result<Self> {
        if row_bytes == 0 {
            return Err(Error::value("rows of 0 bytes", "at least 1 byte"));
        }
        rows.checked_mul(row_bytes)
            .and_then(|content| content.checked_add(HEADER_BYTES))
            .filter(|&length| i64::try_from(length).is_ok())
            .ok_or_else(|| Error::too_large("bytes of the array", format!("{rows} x {row_bytes}"), "2^63 - 1"))?;
        Ok(Self { rows, row_bytes })
    }

    /// The number of samples.
    pub fn rows(&self) -> u64 {
        self.rows
    }

    /// The bytes of a sample.
    pub fn row_bytes(&self) -> u64 {
        self.row_bytes
    }

    /// The length of the file.
    pub fn file_bytes(&self) -> u64 {
        HEADER_BYTES + self.rows * self.row_bytes
    }

    /// Where a row begins in the file; `None` if there is no such row.
    pub fn row_offset(&self, row: u64) -> Option<u64> {
        (row < self.rows).then(|| HEADER_BYTES + row * self.row_bytes)
    }

    /// The header.
    pub fn header(&self) -> [u8; HEADER_BYTES as usize] {
        let dictionary = format!("{BEFORE_SHAPE}{}, {}), }}", self.rows, self.row_bytes);
        let mut header = [b' '; HEADER_BYTES as usize];
        header[..10].copy_from_slice(&PREAMBLE);
        header[10..10 + dictionary.len()].copy_from_slice(dictionary.as_bytes());
        header[HEADER_BYTES as usize - 1] = b'\n';
        header
    }

    /// Reads the header at the beginning of a file of `file_bytes` bytes.
    ///
    /// # Errors
    /// `Damaged` if it is not exactly the header of an array that fills the file, and those of [`Shape::new`].
    pub fn parse(beginning: &[u8], file_bytes: u64) -> Result<Self> {
        let Some(header) = beginning.first_chunk::<{ HEADER_BYTES as usize }>() else {
            return Err(Error::damaged(format!(
                "npy header: found {} bytes, expected {HEADER_BYTES}",
                beginning.len()
            )));
        };
        let (rows, row_bytes) = numbers(header).ok_or_else(|| other_array(header))?;
        let shape = Self::new(rows, row_bytes)?;
        if shape.header() != *header {
            return Err(other_array(header));
        }
        if shape.file_bytes() != file_bytes {
            return Err(Error::damaged(format!(
                "npy file: found {file_bytes} bytes, expected {} for {rows} rows of {row_bytes} bytes",
                shape.file_bytes()
            )));
        }
        Ok(shape)
    }
}

/// The two numbers where the shape must stand.
fn numbers(header: &[u8]) -> Option<(u64, u64)> {
    let dictionary = std::str::from_utf8(header.strip_prefix(&PREAMBLE)?).ok()?;
    let (shape, _) = dictionary.strip_prefix(BEFORE_SHAPE)?.split_once(')')?;
    let (rows, row_bytes) = shape.split_once(", ")?;
    Some((rows.parse().ok()?, row_bytes.parse().ok()?))
}

fn other_array(header: &[u8]) -> Error {
    ErrorKind::Damaged {
        what: format!(
            "npy header: found \"{}\", expected that of bytes (|u1) in C order with two axes",
            header.trim_ascii_end().escape_ascii()
        ),
    }
    .into()
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Headers made by NumPy 2.4.6: `numpy.save` for (3, 5), `numpy.lib.format.write_array_header_1_0` for the others,
    /// with runs of spaces cut to their number.
    const MADE_BY_NUMPY: [(u64, u64, &str, usize); 4] = [
        (3, 5, "{'descr': '|u1', 'fortran_order': False, 'shape': (3, 5), }", 58),
        (0, 7, "{'descr': '|u1', 'fortran_order': False, 'shape': (0, 7), }", 58),
        (
            1_000_000,
            4096,
            "{'descr': '|u1', 'fortran_order': False, 'shape': (1000000, 4096), }",
            49,
        ),
        (
            12_345_678_901,
            3,
            "{'descr': '|u1', 'fortran_order': False, 'shape': (12345678901, 3), }",
            48,
        ),
    ];

    fn made_by_numpy(dictionary: &str, spaces: usize) -> Vec<u8> {
        [
            b"\x93NUMPY\x01\x00v\x00",
            dictionary.as_bytes(),
            " ".repeat(spaces).as_bytes(),
            b"\n",
        ]
        .concat()
    }

    #[test]
    fn headers_are_those_of_numpy() {
        for (rows, row_bytes, dictionary, spaces) in MADE_BY_NUMPY {
            let shape = Shape::new(rows, row_bytes).unwrap();
            let header = made_by_numpy(dictionary, spaces);
            assert_eq!(shape.header()[..], header);
            assert_eq!(Shape::parse(&header, 128 + rows * row_bytes).unwrap(), shape);
        }
        let shape = Shape::new(3, 5).unwrap();
        assert_eq!((shape.row_offset(2), shape.row_offset(3)), (Some(138), None));
    }

    #[test]
    fn the_longest_shapes_fit_the_header() {
        for (rows, row_bytes) in [(u64::MAX >> 2, 1), (1, u64::MAX >> 2), (1 << 31, 1 << 31)] {
            let shape = Shape::new(rows, row_bytes).unwrap();
            assert_eq!(Shape::parse(&shape.header(), shape.file_bytes()).unwrap(), shape);
        }
        assert!(Shape::new(u64::MAX, 2).is_err());
        assert!(Shape::new(u64::MAX >> 1, 1).is_err());
        assert!(Shape::new(3, 0).is_err());
    }

    #[test]
    fn every_other_header_is_refused() {
        let good = Shape::new(3, 5).unwrap().header();
        for at in 0..good.len() {
            for mask in 1..=255 {
                let mut header = good;
                header[at] ^= mask;
                assert!(Shape::parse(&header, 143).is_err(), "byte {at} ^ {mask}");
            }
            assert!(Shape::parse(&good[..at], 143).is_err());
        }
        for length in [0, 128, 142, 144, u64::MAX] {
            assert!(Shape::parse(&good, length).is_err());
        }
        for shape in [
            "(5, 3)",
            "(15,)",
            "(3, 5, 1)",
            "(03, 5)",
            "(+3, 5)",
            "(3,5)",
            "(3, 5L)",
            "(-3, -5)",
            "(3, 0)",
        ] {
            let dictionary = format!("{{'descr': '|u1', 'fortran_order': False, 'shape': {shape}, }}");
            let header = made_by_numpy(&dictionary, 117 - dictionary.len());
            assert_eq!(Shape::parse(&header, 143).is_ok(), shape == "(5, 3)", "{shape}");
        }
        for (from, to) in [
            ("|u1", "|b1"),
            ("|u1", "<u1"),
            ("False", "True "),
            ("'descr'", "\"descr\""),
            ("False", "0    "),
        ] {
            let text = MADE_BY_NUMPY[0].2.replace(from, to);
            assert!(
                Shape::parse(&made_by_numpy(&text, 117 - text.len()), 143).is_err(),
                "{to}"
            );
        }
    }
}
