//! Writing an archive, member by member, front to back.

use std::io::{Read, Write};

use crate::error::{Error, ErrorKind, Result};
use crate::quantity::Digest;
use crate::quantity::Hasher;

use super::Limits;
use super::frames::{Compressor, FrameStart};
use super::index::{self, Directory};
use super::member::{Member, Names, TAR_END, check_name, header, padding};

/// A frame begins after so many bytes of a member's content.
pub(super) const FRAME_CONTENT: u64 = 1 << 20;

/// Writes an archive into a sink. It holds one frame at a time, never a whole member.
///
/// A sink that was given up before [`Writer::finish`] holds no archive. After an error the writer
/// takes nothing more.
pub struct Writer<W> {
    sink: W,
    compressor: Compressor,
    names: Names,
    directory: Directory,
    broken: bool,
}

impl<W: Write> Writer<W> {
    /// An archive without members yet.
    ///
    /// # Errors
    /// `Io` if zstd cannot be set up.
    pub fn new(sink: W) -> Result<Self> {
        Ok(Self {
            sink,
            compressor: Compressor::new()?,
            names: Names::default(),
            directory: Directory {
                members: Vec::new(),
                frames: Vec::new(),
                end: FrameStart {
                    uncompressed: 0,
                    compressed: 0,
                },
            },
            broken: false,
        })
    }

    /// Appends a member and returns the SHA-256 of its content.
    ///
    /// # Errors
    /// Those of [`Writer::add_from`].
    pub fn add(&mut self, name: &str, content: &[u8]) -> Result<Digest> {
        self.add_from(name, content.len() as u64, content)
    }

    /// Appends a member of `size` bytes from a reader, which must end there, and returns the SHA-256 of its content.
    ///
    /// # Errors
    /// `Unsupported` for a name that is not allowed, `Damaged` for one that is there already,
    /// `TooLarge` beyond the default [`Limits`], `Value` if the reader does not give exactly `size`
    /// bytes, `Io` if it or the sink fails, `Conflict` after an earlier error.
    pub fn add_from(&mut self, name: &str, size: u64, content: impl Read) -> Result<Digest> {
        self.unbroken()?;
        self.broken = true;
        let digest = self
            .append(name, size, content)
            .map_err(|error| error.in_member(name))?;
        self.broken = false;
        Ok(digest)
    }

    /// Ends the tar, appends the index and returns the sink, flushed.
    ///
    /// # Errors
    /// `Nothing` without members, `Io` if the sink fails, `Conflict` after an earlier error.
    pub fn finish(mut self) -> Result<W> {
        self.unbroken()?;
        if self.directory.members.is_empty() {
            return Err(ErrorKind::Nothing {
                what: "an archive without members".to_string(),
            }
            .into());
        }
        self.frame(&[0; TAR_END as usize])?;
        let index =
            index::encode(&self.directory).ok_or_else(|| Error::too_large("index of the archive", "more", "4 GiB"))?;
        let written = self.sink.write_all(&index).and_then(|()| self.sink.flush());
        written.map_err(|source| Error::io("write the archive", source))?;
        Ok(self.sink)
    }

    fn unbroken(&self) -> Result<()> {
        if self.broken {
            return Err(Error::conflict("the archive cannot be continued after an error"));
        }
        Ok(())
    }

    fn append(&mut self, name: &str, size: u64, mut content: impl Read) -> Result<Digest> {
        check_name(name.as_bytes())?;
        let limits = Limits::default();
        if size > limits.member_bytes {
            return Err(Error::too_large("bytes of a member", size, limits.member_bytes));
        }
        if self.directory.members.len() as u64 >= limits.members {
            return Err(Error::too_large("members", "one more", limits.members));
        }
        self.names.insert(name)?;
        let member = Member {
            name: name.to_string(),
            header_offset: self.directory.end.uncompressed,
            size,
        };
        let mut hasher = Hasher::default();
        let mut frame = header(name, size).to_vec();
        let mut left = size;
        loop {
            let wanted = left.min(FRAME_CONTENT);
            let begin = frame.len();
            let found = (&mut content).take(wanted).read_to_end(&mut frame);
            let found = found.map_err(|source| Error::io("read the content", source))? as u64;
            if found != wanted {
                return Err(Error::value(
                    format!("{} bytes", size - left + found),
                    format!("{size} bytes"),
                ));
            }
            hasher.update(&frame[begin..]);
            left -= found;
            if left == 0 {
                break;
            }
            self.frame(&frame)?;
            frame.clear();
        }
        let beyond = content.take(1).read_to_end(&mut Vec::new());
        if beyond.map_err(|source| Error::io("read the content", source))? != 0 {
            return Err(Error::value("more bytes", format!("{size} bytes")));
        }
        frame.resize(frame.len() + padding(size), 0);
        self.frame(&frame)?;
        self.directory.members.push(member);
        Ok(hasher.finish())
    }

    fn frame(&mut self, content: &[u8]) -> Result<()> {
        let compressed = self.compressor.compress(content)?;
        self.sink
            .write_all(&compressed)
            .map_err(|source| Error::io("write the archive", source))?;
        let end = &mut self.directory.end;
        self.directory.frames.push(*end);
        end.uncompressed += content.len() as u64;
        end.compressed += compressed.len() as u64;
        Ok(())
    }
}
