//! The directory of a zip archive to its members, and a member to its bytes: stored
//! or deflated, which is all that writers of arrays use. Everything else is refused
//! by name.

use std::io::{Error, ErrorKind, Read, Result as IoResult};

use flate2::Crc;
use flate2::bufread::DeflateDecoder;

use super::Data;
use crate::fault::{Fault, Result, quoted};
use crate::trajectory::budget::Budget;

/// More members than any table has columns.
const MOST_MEMBERS: u64 = 65_536;
/// A larger directory belongs to no such archive.
const MOST_DIRECTORY_BYTES: u64 = 64 << 20;
/// The end record with the longest remark.
const MOST_END_BYTES: u64 = 22 + 65_535;

/// A member of the archive.
#[derive(Clone, Debug)]
pub(super) struct Member {
    pub name: String,
    deflated: bool,
    crc: u32,
    /// Where its bytes start in the file, and how many there are.
    start: u64,
    packed: u64,
    /// How many bytes they unpack to.
    pub length: u64,
}

/// Where the directory is.
struct Directory {
    start: u64,
    size: u64,
    members: u64,
}

/// Reads the directory.
pub(super) fn members(data: &Data) -> Result<Vec<Member>> {
    let directory = directory(data)?;
    if directory.members > MOST_MEMBERS || directory.size > MOST_DIRECTORY_BYTES {
        return Err(Fault::new("the archive has too many members"));
    }
    let bytes = data.exactly(directory.start, directory.size as usize)?;
    let mut rest = bytes.as_slice();
    let mut members: Vec<Member> = Vec::new();
    for _ in 0..directory.members {
        let (member, after) = member(rest).ok_or_else(|| broken("its directory is cut off"))??;
        rest = after;
        members.push(located(data, member, directory.start)?);
    }
    if !rest.is_empty() {
        return Err(broken("its directory is longer than its members"));
    }
    let budget = Budget::of(data.length()?);
    for member in &members {
        budget.spend(member.length).map_err(Fault::new)?;
    }
    refuse_overlaps(&members)?;
    let mut names: Vec<&str> = members.iter().map(|m| m.name.as_str()).collect();
    names.sort_unstable();
    if let Some(pair) = names.windows(2).find(|pair| pair[0] == pair[1]) {
        let text = format!("the archive holds {} twice", quoted(pair[0]));
        return Err(Fault::new(text));
    }
    Ok(members)
}

/// Members that share their bytes would let a small file hold any amount of data.
fn refuse_overlaps(members: &[Member]) -> Result<()> {
    let mut parts: Vec<(u64, u64)> = (members.iter())
        .map(|member| (member.start, member.packed))
        .collect();
    parts.sort_unstable();
    let overlap = |pair: &[(u64, u64)]| pair[0].0.saturating_add(pair[0].1) > pair[1].0;
    if parts.windows(2).any(overlap) {
        return Err(broken("its members lie over each other"));
    }
    Ok(())
}

fn broken(why: &str) -> Fault {
    Fault::new(format!("the archive is damaged or cut off: {why}"))
}

fn number(bytes: &[u8], at: usize, size: usize) -> Option<u64> {
    let part = bytes.get(at..at.checked_add(size)?)?;
    let number = part
        .iter()
        .rev()
        .fold(0u64, |n, &byte| n << 8 | u64::from(byte));
    Some(number)
}

fn directory(data: &Data) -> Result<Directory> {
    let length = data.length()?;
    let tail_length = length.min(MOST_END_BYTES + 20);
    let tail_start = length - tail_length;
    let tail = data.exactly(tail_start, tail_length as usize)?;
    // The remark must reach to the end of the file, or a number in a member could be
    // taken for the record.
    let found = (0..tail.len().saturating_sub(21)).rev().find(|&at| {
        tail[at..].starts_with(b"PK\x05\x06")
            && number(&tail, at + 20, 2) == Some((tail.len() - at - 22) as u64)
    });
    let at = found.ok_or_else(|| broken("it has no end record"))?;
    let field = |offset: usize, size| number(&tail, at + offset, size).unwrap_or(0);
    let mut directory = Directory {
        start: field(16, 4),
        size: field(12, 4),
        members: field(10, 2),
    };
    let disks = [field(4, 2), field(6, 2), field(8, 2)];
    let mut end = tail_start + at as u64;
    let locator = at.checked_sub(20).and_then(|at| tail.get(at..at + 20));
    if let Some(locator) = locator.filter(|bytes| bytes.starts_with(b"PK\x06\x07")) {
        end = number(locator, 8, 8).unwrap_or(u64::MAX);
        let wide = data.exactly(end, 56)?;
        if !wide.starts_with(b"PK\x06\x06") {
            return Err(broken("its long end record is missing"));
        }
        let field = |offset| number(&wide, offset, 8).unwrap_or(u64::MAX);
        directory = Directory {
            start: field(48),
            size: field(40),
            members: field(32),
        };
    } else if disks != [0, 0, directory.members] {
        return Err(Fault::new("the archive is one of several parts"));
    }
    match directory.start.checked_add(directory.size) {
        Some(stop) if stop == end => Ok(directory),
        _ => Err(broken("its directory is not where it should be")),
    }
}

/// One entry of the directory and what follows it; nothing where it is cut off.
/// Until [`located`], `start` is that of the member's own header.
fn member(bytes: &[u8]) -> Option<Result<(Member, &[u8])>> {
    if !bytes.starts_with(b"PK\x01\x02") {
        return None;
    }
    let field = |at, size| number(bytes, at, size);
    let (flags, method) = (field(8, 2)?, field(10, 2)?);
    let lengths = [field(28, 2)?, field(30, 2)?, field(32, 2)?].map(|length| length as usize);
    let name_end = 46 + lengths[0];
    let extra_end = name_end + lengths[1];
    let name = String::from_utf8_lossy(bytes.get(46..name_end)?).into_owned();
    let mut sizes = [field(24, 4)?, field(20, 4)?, field(42, 4)?];
    widen(&mut sizes, bytes.get(name_end..extra_end)?)?;
    let rest = bytes.get(extra_end + lengths[2]..)?;
    if flags & 1 != 0 {
        let text = format!("{} is encrypted", quoted(&name));
        return Some(Err(Fault::new(text)));
    }
    if method != 0 && method != 8 {
        let text = format!("{} is packed by method {method}", quoted(&name));
        let fault = Fault::new(text).help("only stored and deflated members are read");
        return Some(Err(fault));
    }
    let member = Member {
        name,
        deflated: method == 8,
        crc: field(16, 4)? as u32,
        start: sizes[2],
        packed: sizes[1],
        length: sizes[0],
    };
    Some(Ok((member, rest)))
}

/// Sizes that do not fit four bytes stand in an extra field, in this order.
fn widen(sizes: &mut [u64; 3], mut extra: &[u8]) -> Option<()> {
    let missing = u64::from(u32::MAX);
    if !sizes.contains(&missing) {
        return Some(());
    }
    while !extra.is_empty() {
        let (kind, length) = (number(extra, 0, 2)?, number(extra, 2, 2)? as usize);
        let field = extra.get(4..4 + length)?;
        if kind == 1 {
            let mut at = 0;
            for size in sizes.iter_mut().filter(|size| **size == missing) {
                *size = number(field, at, 8)?;
                at += 8;
            }
            return Some(());
        }
        extra = &extra[4 + length..];
    }
    Some(())
}

/// Finds the bytes of a member behind its own header, which must agree.
fn located(data: &Data, mut member: Member, end: u64) -> Result<Member> {
    let header = data.exactly(member.start, 30)?;
    let field = |at, size| number(&header, at, size).unwrap_or(0);
    let method = if member.deflated { 8 } else { 0 };
    if !header.starts_with(b"PK\x03\x04") || field(8, 2) != method {
        return Err(broken("a member is not where the directory says"));
    }
    member.start = member
        .start
        .saturating_add(30 + field(26, 2) + field(28, 2));
    let fits = member.start.checked_add(member.packed);
    if fits.is_none_or(|stop| stop > end) || (!member.deflated && member.packed != member.length) {
        return Err(broken("the size of a member is wrong"));
    }
    Ok(member)
}

impl Member {
    /// The bytes of the member, unpacked as they are read.
    pub fn open(&self, data: &Data) -> Result<Box<dyn Read>> {
        let piece = data.piece(self.start, self.packed)?;
        Ok(match self.deflated {
            true => Box::new(DeflateDecoder::new(piece)),
            false => Box::new(piece),
        })
    }

    /// Reads the member once and compares its length and its checksum; no memory
    /// grows, whatever it unpacks to.
    pub fn verify(&self, data: &Data) -> Result<()> {
        let mut bytes = self.open(data)?;
        let mut crc = Crc::new();
        let mut length = 0u64;
        let mut block = vec![0; 64 * 1024];
        let wrong = |what: String| Fault::new(format!("{} {what}", quoted(&self.name)));
        loop {
            let count = read(&mut *bytes, &mut block)
                .map_err(|error| wrong(format!("cannot be unpacked: {error}")))?;
            if count == 0 {
                break;
            }
            crc.update(&block[..count]);
            length += count as u64;
            if length > self.length {
                return Err(wrong("is longer than the archive says".to_owned()));
            }
        }
        if length != self.length {
            return Err(wrong("is shorter than the archive says".to_owned()));
        }
        if crc.sum() != self.crc {
            return Err(wrong("is damaged: its checksum does not agree".to_owned()));
        }
        Ok(())
    }
}

fn read(bytes: &mut dyn Read, block: &mut [u8]) -> IoResult<usize> {
    loop {
        match bytes.read(block) {
            Err(error) if Error::kind(&error) == ErrorKind::Interrupted => {}
            result => return result,
        }
    }
}
