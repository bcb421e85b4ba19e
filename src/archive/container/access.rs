//! Reading by offset: any part of the tar, by decoding only the frames that hold it.
//!
//! Apart from the [reader](super::reader) because here nothing is decided: a directory that is not
//! true is an error, and what follows from that is the reader's business.

use std::collections::VecDeque;
use std::io::{Read, Seek};
use std::ops::Range;

use crate::error::{Error, Result};

use super::Limits;
use super::frames::{Border, FrameStart, Frames};
use super::index::Directory;

/// What is allocated before the bytes for it have arrived.
const FIRST_ALLOCATION: u64 = 1 << 20;

/// The longest frame that is kept, and how many are: a path through the tree of millions of samples touches about ten.
const LARGEST_KEPT: u64 = 2 << 20;
const MOST_KEPT: usize = 12;

/// Reading by a directory, which need not be true: every frame must begin and end where it says.
pub(super) struct Access<'a, R> {
    frames: Frames<&'a mut R>,
    directory: &'a Directory,
    /// The number of the frame under the cursor.
    current: Option<usize>,
    opened: u64,
}

impl<'a, R: Read + Seek> Access<'a, R> {
    pub(super) fn new(source: &'a mut R, directory: &'a Directory, limits: &Limits) -> Result<Self> {
        Ok(Self {
            frames: Frames::new(source, limits.window_log)?,
            directory,
            current: None,
            opened: 0,
        })
    }

    /// `length` bytes of the tar from `offset` on. Memory grows with the bytes that arrive.
    pub(super) fn read(&mut self, offset: u64, length: u64) -> Result<Vec<u8>> {
        let mut bytes = Vec::with_capacity(length.min(FIRST_ALLOCATION) as usize);
        let mut at = offset;
        let mut left = length;
        while left > 0 {
            let number = self.directory.frame_of(at)?;
            if self.current != Some(number) {
                self.close()?;
                self.enter(number)?;
            }
            let here = self.frames.position().uncompressed;
            let chunk = self.checked_chunk()?;
            if chunk == 0 {
                return Err(Error::damaged("a zstd frame is shorter than the index says").at_offset(here));
            }
            // bytes before the wanted ones are passed over
            let before = at.saturating_sub(here).min(chunk as u64) as usize;
            let take = ((chunk - before) as u64).min(left) as usize;
            bytes.extend_from_slice(&self.frames.chunk()?[before..before + take]);
            self.frames.advance(before + take);
            at += take as u64;
            left -= take as u64;
        }
        Ok(bytes)
    }

    /// Decodes the frame under the cursor to its end, so that its checksum and its end are checked.
    pub(super) fn close(&mut self) -> Result<()> {
        let Some(number) = self.current else {
            return Ok(());
        };
        loop {
            match self.checked_chunk()? {
                0 => break,
                count => self.frames.advance(count),
            }
        }
        if self.frames.position() != self.directory.end_of(number) {
            return Err(Error::damaged("a zstd frame ends elsewhere than the index says")
                .at_offset(self.frames.position().uncompressed));
        }
        self.current = None;
        Ok(())
    }

    /// How many frames were opened so far.
    pub(super) fn opened(&self) -> u64 {
        self.opened
    }

    fn enter(&mut self, number: usize) -> Result<()> {
        let start = self.directory.frames[number];
        if self.frames.position() != start || self.opened == 0 {
            self.frames.jump(start)?;
        }
        if self.frames.border()? != Border::Frame {
            return Err(Error::damaged("no zstd frame begins where the index says").at_offset(start.uncompressed));
        }
        self.current = Some(number);
        self.opened += 1;
        Ok(())
    }

    /// The length of the next chunk, which must lie within the frame as the directory has it.
    fn checked_chunk(&mut self) -> Result<usize> {
        let count = self.frames.chunk()?.len();
        let here = self.frames.position().uncompressed;
        let end = self
            .current
            .map_or(here, |number| self.directory.end_of(number).uncompressed);
        if count as u64 > end.saturating_sub(here) {
            return Err(Error::damaged("a zstd frame is longer than the index says").at_offset(here));
        }
        Ok(count)
    }
}

impl Directory {
    /// The last frame that begins at or before `offset`; of frames without content the one behind them.
    fn frame_of(&self, offset: u64) -> Result<usize> {
        if offset >= self.end.uncompressed {
            return Err(Error::damaged("an offset behind the end of the tar").at_offset(offset));
        }
        let behind = self.frames.partition_point(|frame| frame.uncompressed <= offset);
        behind
            .checked_sub(1)
            .ok_or_else(|| Error::damaged("an offset before the first frame").at_offset(offset))
    }

    fn end_of(&self, number: usize) -> FrameStart {
        *self.frames.get(number + 1).unwrap_or(&self.end)
    }

    /// The frame that holds all of a range of the tar, with its own range, if there is one and it is small enough
    /// to be [`Kept`].
    pub(super) fn small_frame_around(&self, range: &Range<u64>) -> Option<(usize, Range<u64>)> {
        let number = self.frame_of(range.start).ok()?;
        let frame = self.frames[number].uncompressed..self.end_of(number).uncompressed;
        let inside = !range.is_empty() && range.end <= frame.end;
        (inside && frame.end - frame.start <= LARGEST_KEPT).then_some((number, frame))
    }
}

/// The content of the small frames that were decoded last: whoever looks for one sample, or goes through all of
/// them in order, reads many small pieces of few frames.
#[derive(Default)]
pub(super) struct Kept(VecDeque<(usize, Vec<u8>)>);

impl Kept {
    /// The content of a frame that is kept.
    pub(super) fn get(&mut self, number: usize) -> Option<&[u8]> {
        let at = self.0.iter().position(|(kept, _)| *kept == number)?;
        let frame = self.0.remove(at)?;
        self.0.push_back(frame);
        self.0.back().map(|(_, content)| content.as_slice())
    }

    /// Keeps a frame, instead of the one that was not asked for longest.
    pub(super) fn put(&mut self, number: usize, content: Vec<u8>) {
        if self.0.len() == MOST_KEPT {
            self.0.pop_front();
        }
        self.0.push_back((number, content));
    }
}

#[cfg(test)]
mod tests {
    use std::io::Cursor;

    use super::super::frames::Compressor;
    use super::*;

    fn start(uncompressed: u64, compressed: u64) -> FrameStart {
        FrameStart {
            uncompressed,
            compressed,
        }
    }

    /// Reads 10 bytes at 5 by a directory with these frames and this end.
    fn access(file: &[u8], frames: &[FrameStart], end: FrameStart) -> Result<Vec<u8>> {
        let directory = Directory {
            members: Vec::new(),
            frames: frames.to_vec(),
            end,
        };
        let mut source = Cursor::new(file);
        let mut access = Access::new(&mut source, &directory, &Limits::default())?;
        access.read(5, 10).and_then(|bytes| access.close().map(|()| bytes))
    }

    /// The reader falls back to a pass after any of these, so they are seen here only.
    #[test]
    fn a_directory_that_lies_about_its_frames_is_left() {
        let content = vec![7; 1 << 20];
        let first = Compressor::new().unwrap().compress(&content).unwrap();
        let at = first.len() as u64;
        let file = [&first[..], &first[..]].concat();
        let (size, end) = (1 << 20, start(2 << 20, 2 * at));
        let told = |frames: &[FrameStart], end| access(&file, frames, end).unwrap_err().to_string();
        assert_eq!(
            access(&file, &[start(0, 0), start(size, at)], end).unwrap(),
            content[..10]
        );
        assert!(told(&[start(0, 0), start(9, at)], end).contains("longer than the index says"));
        assert!(told(&[start(0, 0), start(100, at)], end).contains("longer than the index says"));
        assert!(told(&[start(0, 0), start(size + 1, at)], end).contains("ends elsewhere"));
        assert!(told(&[start(0, 0), start(size, at + 1)], end).contains("ends elsewhere"));
        assert!(told(&[start(0, 0)], end).contains("ends elsewhere"));
        assert!(told(&[start(0, 1), start(size, at)], end).contains("magic number"));
        assert!(told(&[start(0, 2 * at)], start(size, 3 * at)).contains("no zstd frame begins"));
        let empty = Compressor::new().unwrap().compress(b"").unwrap();
        let told = access(&empty, &[start(0, 0)], start(20, empty.len() as u64)).unwrap_err();
        assert!(told.to_string().contains("shorter than the index says"));
        assert!(access(&file, &[start(0, 0)], start(8, at)).is_err());
        assert!(access(&file, &[start(6, 0)], start(size, at)).is_err());
    }
}
