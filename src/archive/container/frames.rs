//! Zstandard frames (RFC 8878): writing them one by one, reading them with every border known.
//!
//! Apart because the container must know where each frame begins in both the compressed and the
//! uncompressed bytes, which a plain decoder hides. A frame of a stranger is decoded in pieces of
//! bounded size; its header is looked at first, so that a window beyond the limit or a dictionary
//! is refused before anything is allocated.

use std::io::{ErrorKind as IoErrorKind, Read, Seek, SeekFrom};

use zstd::stream::raw::{DParameter, Decoder, InBuffer, Operation as _, OutBuffer};

use crate::error::{Error, ErrorKind, Result};

const FRAME_MAGIC: u32 = 0xFD2F_B528;

/// All skippable frames: the lowest four bits are free (RFC 8878 §3.1.2).
const SKIPPABLE_MAGIC: u32 = 0x184D_2A50;

/// Magic number and length of a skippable frame.
pub(super) const SKIPPABLE_HEADER: usize = 8;

/// Longest frame header, magic number included (RFC 8878 §3.1.1.1).
const FRAME_HEADER: usize = 18;

/// Compressed bytes held; at least what a border needs.
const INPUT_BYTES: usize = 64 << 10;

/// Uncompressed bytes held: one block of the format.
const OUTPUT_BYTES: usize = 128 << 10;

/// Where a frame begins. As a pair it also says where the frame before it must end.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) struct FrameStart {
    /// In the uncompressed archive.
    pub(super) uncompressed: u64,
    /// In the file.
    pub(super) compressed: u64,
}

/// One frame at level 3 with content size and checksum.
pub(super) struct Compressor(zstd::bulk::Compressor<'static>);

impl Compressor {
    pub(super) fn new() -> Result<Self> {
        let mut compressor = zstd::bulk::Compressor::new(3).map_err(|source| Error::io("prepare zstd", source))?;
        for parameter in [
            zstd::stream::raw::CParameter::ChecksumFlag(true),
            zstd::stream::raw::CParameter::ContentSizeFlag(true),
        ] {
            compressor
                .set_parameter(parameter)
                .map_err(|source| Error::io("prepare zstd", source))?;
        }
        Ok(Self(compressor))
    }

    pub(super) fn compress(&mut self, content: &[u8]) -> Result<Vec<u8>> {
        self.0.compress(content).map_err(|source| Error::io("compress", source))
    }
}

/// What stands at a border between frames.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum Border {
    /// A frame with content; it is open now.
    Frame,
    /// A skippable frame with so many bytes after its header; it is not consumed.
    Skippable {
        /// The free four bits of its magic number.
        variant: u8,
        /// The bytes after its header.
        length: u32,
    },
    /// The end of the file.
    End,
}

/// A reader of consecutive frames.
pub(super) struct Frames<R> {
    source: R,
    decoder: Decoder<'static>,
    window_log: u32,
    input: Box<[u8]>,
    /// What is left in `input`.
    input_left: std::ops::Range<usize>,
    output: Box<[u8]>,
    /// What is left in `output`.
    output_left: std::ops::Range<usize>,
    /// The place of the first byte that is not consumed or not handed on.
    position: FrameStart,
    open: bool,
}

impl<R: Read> Frames<R> {
    /// A reader whose source stands at the beginning of the file, and that refuses windows beyond 2^`window_log` bytes.
    pub(super) fn new(source: R, window_log: u32) -> Result<Self> {
        let prepared = |source| Error::io("prepare zstd", source);
        let mut decoder = Decoder::new().map_err(prepared)?;
        decoder
            .set_parameter(DParameter::WindowLogMax(window_log))
            .map_err(prepared)?;
        Ok(Self {
            source,
            decoder,
            window_log,
            input: vec![0; INPUT_BYTES].into(),
            input_left: 0..0,
            output: vec![0; OUTPUT_BYTES].into(),
            output_left: 0..0,
            position: FrameStart {
                uncompressed: 0,
                compressed: 0,
            },
            open: false,
        })
    }

    /// The place of the first byte that is not consumed or not handed on; exact in both parts at borders.
    pub(super) fn position(&self) -> FrameStart {
        self.position
    }

    /// Looks at what follows the frame that was read to its end, and opens it if it is a frame with content.
    pub(super) fn border(&mut self) -> Result<Border> {
        debug_assert!(
            !self.open && self.output_left.is_empty(),
            "the frame before is read to its end"
        );
        let header = self.peek(FRAME_HEADER)?;
        if header.is_empty() {
            return Ok(Border::End);
        }
        let magic = header.first_chunk().map(|bytes| u32::from_le_bytes(*bytes));
        let border = match magic {
            Some(FRAME_MAGIC) => {
                let window = window_size(header).map_err(|error| error.at_offset(self.position.uncompressed))?;
                if window > 1_u64.checked_shl(self.window_log).unwrap_or(u64::MAX) {
                    return Err(self.unsupported(format!(
                        "a zstd window of {window} bytes, at most 2^{}",
                        self.window_log
                    )));
                }
                self.decoder
                    .reinit()
                    .map_err(|source| Error::io("prepare zstd", source))?;
                self.open = true;
                Border::Frame
            }
            Some(magic) if magic & !0xF == SKIPPABLE_MAGIC => {
                let Some(length) = header[4..].first_chunk() else {
                    return Err(self.damaged("the file ends inside a skippable frame"));
                };
                Border::Skippable {
                    variant: (magic & 0xF) as u8,
                    length: u32::from_le_bytes(*length),
                }
            }
            Some(magic) => {
                return Err(self.damaged(format!(
                    "byte {} of the file: found {magic:#010x}, expected the magic number of a zstd frame",
                    self.position.compressed
                )));
            }
            None => return Err(self.damaged("the file ends inside the magic number of a zstd frame")),
        };
        Ok(border)
    }

    /// The next bytes of the open frame; none if it has ended. [`Frames::advance`] consumes them.
    pub(super) fn chunk(&mut self) -> Result<&[u8]> {
        while self.output_left.is_empty() && self.open {
            if self.input_left.is_empty() {
                self.peek(1)?;
            }
            let mut input = InBuffer::around(&self.input[self.input_left.clone()]);
            let mut output = OutBuffer::around(&mut self.output[..]);
            let hint = self.decoder.run(&mut input, &mut output);
            let (consumed, produced) = (input.pos(), output.pos());
            let hint = hint.map_err(|source| self.damaged(format!("zstd frame: {source}")))?;
            self.input_left.start += consumed;
            self.position.compressed += consumed as u64;
            self.output_left = 0..produced;
            if hint == 0 {
                self.open = false;
            } else if consumed == 0 && produced == 0 {
                return Err(self.damaged("the file ends inside a zstd frame"));
            }
        }
        Ok(&self.output[self.output_left.clone()])
    }

    /// Consumes so many bytes of the last [`Frames::chunk`].
    pub(super) fn advance(&mut self, count: usize) {
        debug_assert!(count <= self.output_left.len());
        self.output_left.start += count;
        self.position.uncompressed += count as u64;
    }

    /// At least `count` compressed bytes if the file has them, without consuming any.
    fn peek(&mut self, count: usize) -> Result<&[u8]> {
        if self.input_left.len() < count {
            self.input.copy_within(self.input_left.clone(), 0);
            self.input_left = 0..self.input_left.len();
            while self.input_left.len() < count {
                match self.source.read(&mut self.input[self.input_left.end..]) {
                    Ok(0) => break,
                    Ok(more) => self.input_left.end += more,
                    Err(error) if error.kind() == IoErrorKind::Interrupted => {}
                    Err(error) => return Err(Error::io("read the archive", error)),
                }
            }
        }
        Ok(&self.input[self.input_left.clone()])
    }

    fn damaged(&self, what: impl std::fmt::Display) -> Error {
        Error::damaged(what).at_offset(self.position.uncompressed)
    }

    fn unsupported(&self, what: String) -> Error {
        Error::from(ErrorKind::Unsupported { what }).at_offset(self.position.uncompressed)
    }
}

impl<R: Read + Seek> Frames<R> {
    /// Continues at another frame.
    pub(super) fn jump(&mut self, start: FrameStart) -> Result<()> {
        self.source
            .seek(SeekFrom::Start(start.compressed))
            .map_err(|source| Error::io("read the archive", source))?;
        self.input_left = 0..0;
        self.output_left = 0..0;
        self.open = false;
        self.position = start;
        Ok(())
    }
}

/// The window size that a frame header asks for (RFC 8878 §3.1.1.1), for frames without a dictionary.
fn window_size(header: &[u8]) -> Result<u64> {
    let short = || Error::damaged("the file ends inside the header of a zstd frame");
    let &descriptor = header.get(4).ok_or_else(short)?;
    let single_segment = descriptor & 0x20 != 0;
    let mut at = 5;
    let mut field = |length: usize| {
        let bytes = header.get(at..at + length).ok_or_else(short)?;
        at += length;
        let mut value = [0; 8];
        value[..length].copy_from_slice(bytes);
        Ok::<_, Error>(u64::from_le_bytes(value))
    };
    let mut window = 0;
    if !single_segment {
        let window_descriptor = field(1)?;
        let base = 1_u64 << (10 + (window_descriptor >> 3));
        window = base + base / 8 * (window_descriptor & 7);
    }
    let dictionary = field([0, 1, 2, 4][usize::from(descriptor & 3)])?;
    if dictionary != 0 {
        return Err(ErrorKind::Unsupported {
            what: format!("a zstd frame with dictionary {dictionary}"),
        }
        .into());
    }
    if single_segment {
        window = match descriptor >> 6 {
            0 => field(1)?,
            1 => field(2)? + 256,
            2 => field(4)?,
            _ => field(8)?,
        };
    }
    Ok(window)
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::io::Cursor;

    fn read_all(bytes: &[u8]) -> Result<(Vec<u8>, Vec<FrameStart>)> {
        let mut frames = Frames::new(Cursor::new(bytes), 27)?;
        let (mut content, mut starts) = (Vec::new(), Vec::new());
        loop {
            starts.push(frames.position());
            match frames.border()? {
                Border::Frame => loop {
                    let chunk = frames.chunk()?;
                    if chunk.is_empty() {
                        break;
                    }
                    content.extend_from_slice(chunk);
                    let count = chunk.len();
                    frames.advance(count);
                },
                Border::Skippable { .. } => return Err(Error::damaged("skippable")),
                Border::End => return Ok((content, starts)),
            }
        }
    }

    #[test]
    fn borders_are_found() {
        let mut compressor = Compressor::new().unwrap();
        let parts: [Vec<u8>; 4] = [
            vec![7; 300_000],
            Vec::new(),
            (0..200_000_u32)
                .flat_map(|n| n.wrapping_mul(2_654_435_761).to_le_bytes())
                .collect(),
            b"end".to_vec(),
        ];
        let mut file = Vec::new();
        let mut expected = Vec::new();
        let mut uncompressed = 0;
        for part in &parts {
            expected.push(FrameStart {
                uncompressed,
                compressed: file.len() as u64,
            });
            file.extend(compressor.compress(part).unwrap());
            uncompressed += part.len() as u64;
        }
        expected.push(FrameStart {
            uncompressed,
            compressed: file.len() as u64,
        });
        let (content, starts) = read_all(&file).unwrap();
        assert!(content == parts.concat());
        assert_eq!(starts, expected);
        for cut in (1..file.len())
            .step_by(997)
            .filter(|&cut| !expected.iter().any(|start| start.compressed == cut as u64))
        {
            let error = read_all(&file[..cut]).unwrap_err().to_string();
            assert!(error.contains("the file ends inside"), "cut at {cut}: {error}");
        }
    }

    /// Frames without checksum whose last block is larger than what is left of the output buffer: the decoder holds
    /// output back after it has taken all input.
    #[test]
    fn output_held_back_at_the_end_of_the_file_is_read() {
        let noise: Vec<u8> = (0..75_000_u32)
            .flat_map(|n| n.wrapping_mul(2_654_435_761).to_le_bytes())
            .collect();
        for length in [1, 131_071, 131_072, 131_073, 200_000, 262_144, 300_000] {
            let frame = zstd::stream::encode_all(&noise[..length], 1).unwrap();
            assert!(read_all(&frame).unwrap().0 == noise[..length], "{length}");
        }
    }

    /// Header bytes made by hand from RFC 8878 §3.1.1.1.
    #[test]
    fn windows_and_dictionaries_are_refused_before_decoding() {
        let header = |rest: &[u8]| [&FRAME_MAGIC.to_le_bytes()[..], rest].concat();
        // window descriptor 0: 1 KiB; exponent 17, mantissa 0: 2^27; mantissa 1: an eighth more
        assert_eq!(window_size(&header(&[0, 0])).unwrap(), 1024);
        assert_eq!(window_size(&header(&[0, 17 << 3])).unwrap(), 1 << 27);
        assert_eq!(
            window_size(&header(&[0, (17 << 3) | 1])).unwrap(),
            (1 << 27) + (1 << 24)
        );
        // single segment with a content size of 1, 2, 4 and 8 bytes
        assert_eq!(window_size(&header(&[0x20, 9])).unwrap(), 9);
        assert_eq!(window_size(&header(&[0x60, 1, 1])).unwrap(), 257 + 256);
        assert_eq!(window_size(&header(&[0xA0, 0, 0, 0, 8])).unwrap(), 1 << 27);
        assert_eq!(window_size(&header(&[0xE0, 0, 0, 0, 0, 1, 0, 0, 0])).unwrap(), 1 << 32);
        assert!(window_size(&header(&[0xE0, 0, 0])).is_err());
        let refused = |rest: &[u8]| read_all(&header(rest)).unwrap_err().to_string();
        assert!(refused(&[0, (17 << 3) | 1, 1, 0, 0]).contains("not supported: a zstd window of 150994944 bytes"));
        assert!(refused(&[0, 255, 1, 0, 0]).contains("not supported: a zstd window"));
        assert!(refused(&[0x23, 5, 0, 0, 0, 9]).contains("not supported: a zstd frame with dictionary 5"));
    }

    #[test]
    fn what_is_no_frame_is_refused() {
        for bytes in [
            &b"\x28"[..],
            b"\x28\xb5\x2f",
            b"PK\x03\x04 a zip",
            b"\x28\xb5\x2f\xfd",
            b"\x50\x2a\x4d\x18\0",
        ] {
            assert!(
                matches!(read_all(bytes).unwrap_err().kind(), ErrorKind::Damaged { .. }),
                "{bytes:?}"
            );
        }
        let mut frames = Frames::new(Cursor::new(b"\x57\x2a\x4d\x18\x05\0\0\0hello"), 27).unwrap();
        assert_eq!(frames.border().unwrap(), Border::Skippable { variant: 7, length: 5 });
    }
}
