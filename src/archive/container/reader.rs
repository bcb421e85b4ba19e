//! Reading a stranger's archive: member by member from the front, or one member by its offsets.

use std::collections::BTreeMap;
use std::fs::File;
use std::io::{self, Read, Seek, SeekFrom};
use std::ops::Range;
use std::path::{Path, PathBuf};

use crate::error::{Error, ErrorKind, Result};

use super::access::{Access, Kept};
use super::frames::{Border, FrameStart, Frames, SKIPPABLE_HEADER};
use super::index::{self, Directory, TAIL};
use super::member::{BLOCK, Member, Names, padding, parse_header};
use super::{IndexState, Limits};

/// An archive that is open for reading.
pub struct Archive<R = File> {
    source: R,
    path: Option<PathBuf>,
    limits: Limits,
    file_length: u64,
    view: Option<View>,
    index_state: Option<IndexState>,
    frames_decoded: u64,
}

/// A directory in use.
struct View {
    directory: Directory,
    by_name: BTreeMap<String, usize>,
    origin: Origin,
    /// For each member, whether its header was compared.
    compared: Vec<bool>,
    kept: Kept,
}

#[derive(Clone, Copy, PartialEq, Eq)]
enum Origin {
    Index,
    Pass,
}

impl View {
    fn new(directory: Directory, origin: Origin) -> Self {
        let names = directory.members.iter().map(|member| member.name.clone());
        Self {
            by_name: names.zip(0..).collect(),
            compared: vec![false; directory.members.len()],
            kept: Kept::default(),
            directory,
            origin,
        }
    }
}

impl Archive<File> {
    /// Opens an archive, with the default limits.
    ///
    /// # Errors
    /// `Io` if the file cannot be read. What is wrong inside shows later.
    pub fn open(path: &Path) -> Result<Self> {
        let opened = File::open(path)
            .map_err(|source| Error::io("open", source))
            .and_then(|file| Self::new(file, Limits::default()));
        let mut archive = opened.map_err(|error| error.in_file(path))?;
        archive.path = Some(path.to_path_buf());
        Ok(archive)
    }
}

impl<R: Read + Seek> Archive<R> {
    /// An archive from any source, with chosen limits.
    ///
    /// # Errors
    /// `Io` if the source cannot be read. What is wrong inside shows later.
    pub fn new(mut source: R, limits: Limits) -> Result<Self> {
        let (file_length, hint) =
            read_index(&mut source, &limits).map_err(|source| Error::io("read the archive", source))?;
        Ok(Self {
            source,
            path: None,
            limits,
            file_length,
            view: hint.map(|directory| View::new(directory, Origin::Index)),
            index_state: None,
            frames_decoded: 0,
        })
    }

    /// Visits all members in order, from the first byte of the file to the last, without the index.
    ///
    /// Success means that the file is a container as defined, wholly: every byte was read and
    /// decoded, and nothing is hidden beside the members. A visitor need not read a content to its
    /// end. Damage found while it reads is returned whatever the visitor makes of it.
    ///
    /// # Errors
    /// `Damaged`, `Unsupported`, `TooLarge` (a limit) or `Nothing` (no members) for what the file
    /// holds, `Io` if it cannot be read, and any error of the visitor, which ends the walk.
    pub fn walk(&mut self, mut visit: impl FnMut(&Member, &mut dyn Read) -> Result<()>) -> Result<()> {
        let passed = self.pass(&mut visit);
        self.in_file(passed)
    }

    /// What the last whole pass found out about the index; `None` before one has succeeded.
    pub fn index_state(&self) -> Option<IndexState> {
        self.index_state
    }

    /// The members in order. Before a walk this may be what the index says: good enough to find
    /// one, no proof that there are no others.
    ///
    /// # Errors
    /// Those of [`Archive::walk`], if there is no index.
    pub fn members(&mut self) -> Result<&[Member]> {
        let passed = match self.view {
            None => self.pass(&mut |_, _| Ok(())),
            Some(_) => Ok(()),
        };
        self.in_file(passed)?;
        Ok(self.view.as_ref().map_or(&[], |view| &view.directory.members))
    }

    /// Whether a member of this name is listed: as in [`Archive::members`] no proof before a walk, but at no cost.
    ///
    /// # Errors
    /// Those of [`Archive::walk`], if there is no index.
    pub fn lists(&mut self, name: &str) -> Result<bool> {
        self.members()?;
        Ok(self.view.as_ref().is_some_and(|view| view.by_name.contains_key(name)))
    }

    /// The member of this name, with its header compared; `None` if a pass over the whole file finds none.
    ///
    /// # Errors
    /// Those of [`Archive::walk`].
    pub fn find(&mut self, name: &str) -> Result<Option<Member>> {
        let found = self.find_compared(name);
        self.in_file(found)
    }

    /// The whole content of a member of at most `limit` bytes.
    ///
    /// # Errors
    /// `Missing` if there is no such member, `TooLarge` if it is longer, and those of [`Archive::walk`].
    pub fn read(&mut self, name: &str, limit: u64) -> Result<Vec<u8>> {
        let read = self.fetch(name, &|member| {
            if member.size > limit {
                return Err(Error::too_large("bytes of the member", member.size, limit));
            }
            // padding is part of what is read, so that nothing hides there
            Ok(0..member.size + padding(member.size) as u64)
        });
        self.in_file(read)
    }

    /// `length` bytes of a member from `start` on. Only the frames that hold them are decoded (and
    /// once the frame of its header).
    ///
    /// # Errors
    /// `Missing` if there is no such member, `Value` if the range is not inside it, and those of [`Archive::walk`].
    pub fn read_range(&mut self, name: &str, start: u64, length: u64) -> Result<Vec<u8>> {
        let read = self.fetch(name, &|member| match start.checked_add(length) {
            Some(end) if end <= member.size => Ok(start..end),
            _ => Err(Error::value(
                format!("a range of {length} bytes from {start}"),
                format!("a range inside {} bytes", member.size),
            )),
        });
        self.in_file(read)
    }

    /// How many frames were opened for decoding so far: a measure of the work done.
    pub fn frames_decoded(&self) -> u64 {
        self.frames_decoded
    }

    fn in_file<T>(&self, result: Result<T>) -> Result<T> {
        match &self.path {
            Some(path) => result.map_err(|error| error.in_file(path)),
            None => result,
        }
    }

    // -- from the front --

    fn pass(&mut self, visit: &mut dyn FnMut(&Member, &mut dyn Read) -> Result<()>) -> Result<()> {
        self.source
            .rewind()
            .map_err(|source| Error::io("read the archive", source))?;
        let mut stream = Stream {
            frames: Frames::new(&mut self.source, self.limits.window_log)?,
            starts: Vec::new(),
            limit: self.limits.frames,
        };
        let members = walk_tar(&mut stream, &self.limits, visit);
        self.frames_decoded += stream.starts.len() as u64;
        let members = members?;
        let (end, follows) = stream.end(self.file_length)?;
        let directory = Directory {
            members,
            frames: stream.starts,
            end,
        };
        let hint = self.view.take().filter(|view| view.origin == Origin::Index);
        if self.index_state.is_none() {
            self.index_state = Some(match (follows, hint) {
                (Follows::Nothing, _) => IndexState::Absent,
                (Follows::SkippableFrame, Some(hint)) if hint.directory == directory => IndexState::Agrees,
                (Follows::SkippableFrame, _) => IndexState::Disagrees,
            });
        }
        self.view = Some(View::new(directory, Origin::Pass));
        Ok(())
    }

    // -- by offset --

    /// The bytes of a member that `wanted` chooses, cut at the end of its content.
    fn fetch(&mut self, name: &str, wanted: &dyn Fn(&Member) -> Result<Range<u64>>) -> Result<Vec<u8>> {
        let missing = || Error::missing("the member", "a member of this name");
        let in_member = |error: Error| error.in_member(name);
        let member = self.find_compared(name)?.ok_or_else(missing).map_err(in_member)?;
        let range = wanted(&member).map_err(in_member)?;
        match self.extract(&member, &range).map_err(in_member) {
            Err(_) if self.follows_index() => {
                self.pass(&mut |_, _| Ok(()))?;
                let member = self.find_compared(name)?.ok_or_else(missing).map_err(in_member)?;
                let range = wanted(&member).map_err(in_member)?;
                self.extract(&member, &range).map_err(in_member)
            }
            read => read,
        }
    }

    fn follows_index(&self) -> bool {
        self.view.as_ref().is_some_and(|view| view.origin == Origin::Index)
    }

    fn find_compared(&mut self, name: &str) -> Result<Option<Member>> {
        if self.follows_index() {
            if let Ok(Some(member)) = self.look_up(name) {
                return Ok(Some(member));
            }
        }
        if self.view.as_ref().is_none_or(|view| view.origin == Origin::Index) {
            self.pass(&mut |_, _| Ok(()))?;
        }
        self.look_up(name).map_err(|error| error.in_member(name))
    }

    /// The member as the directory in use lists it; an error if the header at its place is another.
    fn look_up(&mut self, name: &str) -> Result<Option<Member>> {
        let Some(view) = &mut self.view else {
            return Ok(None);
        };
        let Some(&number) = view.by_name.get(name) else {
            return Ok(None);
        };
        let member = view.directory.members[number].clone();
        if !view.compared[number] {
            let mut access = Access::new(&mut self.source, &view.directory, &self.limits)?;
            let header = access.read(member.header_offset, BLOCK as u64);
            self.frames_decoded += access.opened();
            let header = header?;
            let block = header.first_chunk().ok_or_else(|| Error::damaged("no header"))?;
            if parse_header(block)? != (member.name.clone(), member.size) {
                return Err(Error::damaged("the header of another member").at_offset(member.header_offset));
            }
            view.compared[number] = true;
        }
        Ok(Some(member))
    }

    fn extract(&mut self, member: &Member, range: &Range<u64>) -> Result<Vec<u8>> {
        let content = member.content_offset();
        let mut bytes = self.cut(content + range.start..content + range.end)?;
        if range.end > member.size {
            let padding = bytes.split_off((member.size - range.start) as usize);
            zeros(&padding, "padding").map_err(|error| error.at_offset(content + member.size))?;
        }
        Ok(bytes)
    }

    /// Bytes of the tar. What lies in one small frame is cut out of it, and the frame kept for what is asked next.
    fn cut(&mut self, range: Range<u64>) -> Result<Vec<u8>> {
        let Some(view) = &mut self.view else {
            return Err(Error::damaged("no directory"));
        };
        let frame = view.directory.small_frame_around(&range);
        let cut = |content: &[u8], frame: &Range<u64>| {
            content[(range.start - frame.start) as usize..(range.end - frame.start) as usize].to_vec()
        };
        if let Some((number, frame)) = &frame {
            if let Some(content) = view.kept.get(*number) {
                return Ok(cut(content, frame));
            }
        }
        let whole = frame.as_ref().map_or(&range, |(_, frame)| frame);
        let mut access = Access::new(&mut self.source, &view.directory, &self.limits)?;
        let read = access
            .read(whole.start, whole.end - whole.start)
            .and_then(|bytes| access.close().map(|()| bytes));
        self.frames_decoded += access.opened();
        let bytes = read?;
        let Some((number, frame)) = frame else {
            return Ok(bytes);
        };
        let wanted = cut(&bytes, &frame);
        view.kept.put(number, bytes);
        Ok(wanted)
    }
}

/// The length of the file, and what its index says if it is there and consistent.
fn read_index(source: &mut (impl Read + Seek), limits: &Limits) -> io::Result<(u64, Option<Directory>)> {
    let file_length = source.seek(SeekFrom::End(0))?;
    if file_length < TAIL as u64 {
        return Ok((file_length, None));
    }
    let mut tail = [0; TAIL];
    source.seek(SeekFrom::Start(file_length - TAIL as u64))?;
    source.read_exact(&mut tail)?;
    let Some(length) = index::frame_length(&tail, file_length, limits) else {
        return Ok((file_length, None));
    };
    let offset = file_length - length as u64;
    let mut frame = Vec::new();
    source.seek(SeekFrom::Start(offset))?;
    source.take(length as u64).read_to_end(&mut frame)?;
    Ok((file_length, index::decode(&frame, offset, limits)))
}

fn zeros(bytes: &[u8], what: &str) -> Result<()> {
    match bytes.iter().find(|&&byte| byte != 0) {
        Some(byte) => Err(Error::damaged(format!(
            "{what}: found byte {byte:#04x}, expected zeros"
        ))),
        None => Ok(()),
    }
}

/// What stands behind the tar.
#[derive(Clone, Copy, PartialEq, Eq)]
enum Follows {
    Nothing,
    SkippableFrame,
}

/// The uncompressed bytes of consecutive frames, with the borders met.
struct Stream<R> {
    frames: Frames<R>,
    starts: Vec<FrameStart>,
    limit: u64,
}

impl<R: Read> Stream<R> {
    fn position(&self) -> u64 {
        self.frames.position().uncompressed
    }

    /// Fills `bytes`, on into the next frames where needed.
    fn fill(&mut self, bytes: &mut [u8], what: &str) -> Result<()> {
        let mut filled = 0;
        while filled < bytes.len() {
            match self.read(&mut bytes[filled..])? {
                0 => {
                    return Err(Error::damaged(format!("the file ends inside {what}")).at_offset(self.position()));
                }
                more => filled += more,
            }
        }
        Ok(())
    }

    /// Some bytes, at least one unless the file ends here.
    fn read(&mut self, bytes: &mut [u8]) -> Result<usize> {
        loop {
            let chunk = self.frames.chunk()?;
            if !chunk.is_empty() {
                let count = chunk.len().min(bytes.len());
                bytes[..count].copy_from_slice(&chunk[..count]);
                self.frames.advance(count);
                return Ok(count);
            }
            let start = self.frames.position();
            match self.frames.border()? {
                Border::Frame if self.starts.len() as u64 >= self.limit => {
                    return Err(Error::from(ErrorKind::Unsupported {
                        what: format!("more than {} zstd frames", self.limit),
                    })
                    .at_offset(start.uncompressed));
                }
                Border::Frame => self.starts.push(start),
                Border::Skippable { .. } => {
                    return Err(Error::damaged("a skippable zstd frame before the end of the tar")
                        .at_offset(start.uncompressed));
                }
                Border::End => return Ok(0),
            }
        }
    }

    /// The end of the tar, at which this stream must stand, and what follows it in a file of so many bytes.
    fn end(&mut self, file_length: u64) -> Result<(FrameStart, Follows)> {
        let offset = self.position();
        let damaged = |what: String| Error::damaged(what).at_offset(offset);
        if !self.frames.chunk()?.is_empty() {
            return Err(damaged("bytes after the end of the tar".to_string()));
        }
        let end = self.frames.position();
        match self.frames.border()? {
            Border::End => Ok((end, Follows::Nothing)),
            Border::Frame => Err(damaged("a zstd frame after the end of the tar".to_string())),
            Border::Skippable { length, .. } => {
                let expected = end.compressed + SKIPPABLE_HEADER as u64 + u64::from(length);
                if expected != file_length {
                    return Err(damaged(format!(
                        "the file has {file_length} bytes, but its last skippable frame ends at {expected}"
                    )));
                }
                Ok((end, Follows::SkippableFrame))
            }
        }
    }
}

/// Reads a tar to its two zero blocks.
fn walk_tar<R: Read>(
    stream: &mut Stream<R>,
    limits: &Limits,
    visit: &mut dyn FnMut(&Member, &mut dyn Read) -> Result<()>,
) -> Result<Vec<Member>> {
    let mut members = Vec::new();
    let mut names = Names::default();
    loop {
        let header_offset = stream.position();
        let mut block = [0; BLOCK];
        stream.fill(&mut block, "the tar")?;
        if block == [0; BLOCK] {
            stream.fill(&mut block, "the end of the tar")?;
            zeros(&block, "second block of the end of the tar").map_err(|error| error.at_offset(header_offset))?;
            break;
        }
        let (name, size) = parse_header(&block).map_err(|error| error.at_offset(header_offset))?;
        let member = Member {
            name,
            header_offset,
            size,
        };
        let placed = |error: Error| error.in_member(&member.name).at_offset(header_offset);
        if members.len() as u64 >= limits.members {
            return Err(placed(Error::too_large("members", "one more", limits.members)));
        }
        if size > limits.member_bytes {
            return Err(placed(Error::too_large("bytes of a member", size, limits.member_bytes)));
        }
        names.insert(&member.name).map_err(placed)?;
        let mut content = Content {
            stream,
            left: size,
            fault: None,
        };
        let visited = visit(&member, &mut content);
        let rest = match content.fault.take() {
            Some(fault) => Err(fault),
            None => visited.and_then(|()| content.skip()),
        };
        rest.map_err(|error| error.in_member(&member.name))?;
        let mut gap = [0; BLOCK];
        let gap = &mut gap[..padding(size)];
        let offset = stream.position();
        stream
            .fill(gap, "padding")
            .and_then(|()| zeros(gap, "padding"))
            .map_err(|error| error.in_member(&member.name).at_offset(offset))?;
        members.push(member);
    }
    if members.is_empty() {
        return Err(ErrorKind::Nothing {
            what: "an archive without members".to_string(),
        }
        .into());
    }
    Ok(members)
}

/// The content of a member for a visitor. A fault is kept, because the visitor sees only an `io::Error` of it.
struct Content<'a, R> {
    stream: &'a mut Stream<R>,
    left: u64,
    fault: Option<Error>,
}

impl<R: Read> Content<'_, R> {
    fn next(&mut self, bytes: &mut [u8]) -> Result<usize> {
        let wanted = bytes.len().min(usize::try_from(self.left).unwrap_or(usize::MAX));
        if wanted == 0 {
            return Ok(0);
        }
        let count = self.stream.read(&mut bytes[..wanted])?;
        if count == 0 {
            let missing = format!("the file ends {} bytes before the end of a member", self.left);
            return Err(Error::damaged(missing).at_offset(self.stream.position()));
        }
        self.left -= count as u64;
        Ok(count)
    }

    fn skip(&mut self) -> Result<()> {
        let mut bytes = [0; 16 << 10];
        while self.next(&mut bytes)? > 0 {}
        Ok(())
    }
}

impl<R: Read> Read for Content<'_, R> {
    fn read(&mut self, bytes: &mut [u8]) -> io::Result<usize> {
        if self.fault.is_none() {
            match self.next(bytes) {
                Ok(count) => return Ok(count),
                Err(fault) => self.fault = Some(fault),
            }
        }
        Err(io::Error::other("the archive cannot be read further"))
    }
}
