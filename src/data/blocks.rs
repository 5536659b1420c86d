//! A file in blocks of whole lines, read on a thread of its own while the block before is worked on.

use std::io::{self, Read};
use std::ops::ControlFlow;
use std::sync::mpsc::{Receiver, Sender, SyncSender, channel, sync_channel};
use std::thread;

/// Bytes asked for at a time.
const BLOCK: usize = 1 << 18;

/// Blocks that may wait to be worked on.
const WAITING: usize = 3;

/// A line may be this long, in bytes.
pub(super) const LONGEST_LINE: usize = 1_000_000;

/// Some whole lines of a file.
pub(super) struct Block {
    /// The bytes: up to the last line end that was read, or to the end of the file.
    pub bytes: Vec<u8>,
    /// Whether the file ends here.
    pub last: bool,
    /// What is wrong with the bytes, and where it starts.
    pub flaw: Option<(Flaw, usize)>,
}

/// What can be wrong with bytes before they are looked at as a table.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Flaw {
    /// Not UTF-8.
    NotUtf8,
    /// A zero byte.
    ZeroByte,
    /// No line end within [`LONGEST_LINE`].
    LongLine,
}

/// Hands the blocks of a file to `work`, in order, until it breaks off or the file ends. Only a file read to its end is
/// read whole.
///
/// # Errors
/// What the reader says.
pub(super) fn each_block(mut reader: impl Read + Send, mut work: impl FnMut(&Block) -> ControlFlow<()>) -> io::Result<()> {
    thread::scope(|scope| {
        let (full, blocks) = sync_channel(WAITING);
        let (give_back, empty) = channel();
        let reading = scope.spawn(move || read_blocks(&mut reader, &full, &empty));
        work_through(&blocks, &give_back, &mut work);
        // The reading thread stops at its next block when nobody takes it.
        drop(blocks);
        match reading.join() {
            Ok(outcome) => outcome,
            Err(panic) => std::panic::resume_unwind(panic),
        }
    })
}

fn work_through(blocks: &Receiver<Block>, give_back: &Sender<Vec<u8>>, work: &mut impl FnMut(&Block) -> ControlFlow<()>) {
    for block in blocks {
        if work(&block).is_break() {
            return;
        }
        // Nobody takes it back once the file is read.
        let _ = give_back.send(block.bytes);
    }
}

fn read_blocks(reader: &mut impl Read, full: &SyncSender<Block>, empty: &Receiver<Vec<u8>>) -> io::Result<()> {
    let mut carried: Vec<u8> = Vec::new();
    loop {
        let mut bytes = empty.try_recv().unwrap_or_default();
        bytes.clear();
        bytes.append(&mut carried);
        let last = fill(reader, &mut bytes)?;
        if !last {
            let end = end_of_whole_lines(&bytes);
            carried.extend_from_slice(&bytes[end..]);
            bytes.truncate(end);
        }
        let flaw = if carried.len() > LONGEST_LINE { Some((Flaw::LongLine, bytes.len())) } else { flaw(&bytes) };
        if bytes.is_empty() && !last && flaw.is_none() {
            continue;
        }
        let stop = last || flaw.is_some();
        if full.send(Block { bytes, last, flaw }).is_err() || stop {
            return Ok(());
        }
    }
}

/// Appends [`BLOCK`] bytes, or fewer where the file ends; whether it ends.
fn fill(reader: &mut impl Read, bytes: &mut Vec<u8>) -> io::Result<bool> {
    let start = bytes.len();
    bytes.resize(start + BLOCK, 0);
    let mut at = start;
    while at < bytes.len() {
        match reader.read(&mut bytes[at..]) {
            Ok(0) => {
                bytes.truncate(at);
                return Ok(true);
            }
            Ok(count) => at += count,
            Err(error) if error.kind() == io::ErrorKind::Interrupted => {}
            Err(error) => return Err(error),
        }
    }
    Ok(false)
}

fn end_of_whole_lines(bytes: &[u8]) -> usize {
    if let Some(at) = bytes.iter().rposition(|byte| *byte == b'\n') {
        return at + 1;
    }
    // Lines may end in a carriage return alone; the last byte may be the first half of a pair.
    bytes[..bytes.len().saturating_sub(1)].iter().rposition(|byte| *byte == b'\r').map_or(0, |at| at + 1)
}

fn flaw(bytes: &[u8]) -> Option<(Flaw, usize)> {
    let text = std::str::from_utf8(bytes).err().map(|error| (Flaw::NotUtf8, error.valid_up_to()));
    let zero = if bytes.contains(&0) { bytes.iter().position(|byte| *byte == 0).map(|at| (Flaw::ZeroByte, at)) } else { None };
    match (text, zero) {
        (Some(text), Some(zero)) => Some(if zero.1 < text.1 { zero } else { text }),
        (text, zero) => text.or(zero),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn blocks_end_with_lines_and_join_to_the_file() {
        let text: String = (0..40_000).map(|number| format!("{number},{}\n", "x".repeat(number % 40))).collect();
        let (mut joined, mut count) = (Vec::new(), 0);
        each_block(text.as_bytes(), |block| {
            assert!(block.last || block.bytes.ends_with(b"\n"));
            joined.extend_from_slice(&block.bytes);
            count += 1;
            ControlFlow::Continue(())
        })
        .unwrap();
        assert!(joined == text.as_bytes());
        assert!(count > 3, "{count} blocks");
    }

    #[test]
    fn flaws_are_placed() {
        assert_eq!(flaw(b"abc"), None);
        assert_eq!(flaw(b"ab\xff\0"), Some((Flaw::NotUtf8, 2)));
        assert_eq!(flaw(b"a\0b\xff"), Some((Flaw::ZeroByte, 1)));
    }
}
