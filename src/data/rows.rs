//! From blocks of bytes to rows of cells.
//!
//! What a quotation mark means is for the `csv` crate to say: rows without one, and whose lines end in LF or CRLF, are cut
//! here; from the first other row on, the crate reads the rest of its block.

use super::blocks::{Flaw, LONGEST_LINE, each_block};
use std::io::{self, Read};
use std::ops::{ControlFlow, Range};

/// One row of a file that is not blank.
pub(super) struct Row<'a> {
    /// Line on which it starts, from one.
    pub line: usize,
    /// Its bytes as they stand in the file, without the line end.
    pub raw: &'a [u8],
    text: &'a [u8],
    bounds: &'a [(u32, u32)],
}

impl<'a> Row<'a> {
    /// How many cells.
    pub fn len(&self) -> usize {
        self.bounds.len()
    }

    /// A cell, quotation marks resolved; empty where the row is too short.
    pub fn cell(&self, field: usize) -> &'a [u8] {
        self.bounds.get(field).map_or(&[], |(start, end)| &self.text[*start as usize..*end as usize])
    }
}

/// Why the rows of a file end before the file does.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(super) enum Broken {
    /// The bytes cannot be a table's. Line, and the line's bytes up to the flaw.
    Bytes(Flaw, usize, Vec<u8>),
    /// A quotation mark on this line, after these bytes of the row, is never closed.
    OpenQuote(usize, Vec<u8>),
}

/// Takes the rows of a file.
pub(super) trait TakeRows {
    /// Takes as many rows as it can from the start of `bytes`, whose first line is `line`, each complete with its line end
    /// and in order in every respect; how many bytes and rows it took.
    fn quick(&mut self, bytes: &[u8], line: usize) -> (usize, usize);

    /// Takes a row that may have any fault.
    fn row(&mut self, row: &Row<'_>) -> ControlFlow<()>;

    /// Takes note of a line whose cells cannot be told apart by itself; nothing of it may be shown.
    fn unclear(&mut self, line: usize) -> ControlFlow<()>;
}

/// How rows are told apart.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Rows {
    /// As the `csv` crate says: a cell between quotation marks may hold line ends.
    Quoted,
    /// Each on one line, every quotation mark around a whole cell. Where arms must not be seen, a mark out of place could
    /// otherwise make a cell swallow the arm beside it, so that what is said of the cell would tell the arm.
    OneLine,
}

/// Gives the rows of a file to `taker`.
///
/// # Errors
/// What the reader says.
pub(super) fn each_row(reader: impl Read + Send, separator: u8, rows: Rows, taker: &mut impl TakeRows) -> io::Result<Option<Broken>> {
    let mut cutter = Cutter { separator, rows, line: 1, pending: Vec::new(), bounds: Vec::new(), broken: None, first: true };
    each_block(reader, |block| {
        let start = if cutter.first && block.bytes.starts_with(b"\xef\xbb\xbf") { 3 } else { 0 };
        cutter.first = false;
        let end = block.flaw.map_or(block.bytes.len(), |(_, at)| line_start(&block.bytes, at)).max(start);
        let bytes = &block.bytes[start..end];
        let last = block.last && block.flaw.is_none();
        let flow = if cutter.pending.is_empty() {
            cutter.cut(bytes, last, taker)
        } else {
            let mut joined = std::mem::take(&mut cutter.pending);
            joined.extend_from_slice(bytes);
            cutter.cut(&joined, last, taker)
        };
        if flow.is_continue()
            && let Some((flaw, at)) = block.flaw
        {
            let line = cutter.line + count_lines(&cutter.pending);
            cutter.broken = Some(Broken::Bytes(flaw, line, block.bytes[end..at.max(end)].to_vec()));
            return ControlFlow::Break(());
        }
        flow
    })?;
    Ok(cutter.broken)
}

fn line_start(bytes: &[u8], at: usize) -> usize {
    bytes[..at].iter().rposition(|byte| matches!(byte, b'\n' | b'\r')).map_or(0, |before| before + 1)
}

/// Line ends in `bytes`: LF, CRLF, or CR alone.
pub(super) fn count_lines(bytes: &[u8]) -> usize {
    let feeds = bytes.iter().filter(|byte| **byte == b'\n').count();
    let lone = if bytes.contains(&b'\r') {
        (0..bytes.len()).filter(|at| bytes[*at] == b'\r' && bytes.get(at + 1) != Some(&b'\n')).count()
    } else {
        0
    };
    feeds + lone
}

struct Cutter {
    separator: u8,
    rows: Rows,
    line: usize,
    /// A row that its block does not finish: it has an open quotation mark.
    pending: Vec<u8>,
    bounds: Vec<(u32, u32)>,
    broken: Option<Broken>,
    first: bool,
}

impl Cutter {
    fn cut(&mut self, bytes: &[u8], last: bool, taker: &mut impl TakeRows) -> ControlFlow<()> {
        let mut at = 0;
        while at < bytes.len() {
            let (taken, rows) = taker.quick(&bytes[at..], self.line);
            at += taken;
            self.line += rows;
            let rest = &bytes[at..];
            if rest.is_empty() {
                break;
            }
            let end = rest.iter().position(|byte| *byte == b'\n').unwrap_or(rest.len());
            let raw = rest[..end].strip_suffix(b"\r").unwrap_or(&rest[..end]);
            let odd = raw.iter().any(|byte| matches!(byte, b'"' | b'\r'));
            if odd && self.rows == Rows::OneLine {
                at += self.one_line(rest, taker)?;
                continue;
            }
            if odd || (end == rest.len() && raw.len() < end) {
                return self.by_the_csv_crate(rest, last, taker);
            }
            if !raw.is_empty() {
                split(raw, self.separator, &mut self.bounds);
                taker.row(&Row { line: self.line, raw, text: raw, bounds: &self.bounds })?;
            }
            self.line += 1;
            at += end + 1;
        }
        ControlFlow::Continue(())
    }

    /// Takes one line, up to LF, CRLF or CR alone; how many bytes it has with its end.
    fn one_line(&mut self, bytes: &[u8], taker: &mut impl TakeRows) -> ControlFlow<(), usize> {
        let length = bytes.iter().position(|byte| matches!(byte, b'\n' | b'\r')).unwrap_or(bytes.len());
        let raw = &bytes[..length];
        let (cells, open) = spans(raw, self.separator);
        let whole = |cell: &Range<usize>| {
            let cell = &raw[cell.clone()];
            match cell.first() {
                Some(b'"') => {
                    cell.len() > 1
                        && cell.ends_with(b"\"")
                        && !cell[1..cell.len() - 1].split(|byte| *byte != b'"').any(|run| run.len() % 2 == 1)
                }
                _ => !cell.contains(&b'"'),
            }
        };
        if open.is_some() || !cells.iter().all(whole) {
            taker.unclear(self.line)?;
        } else if !raw.is_empty() {
            let mut text = Vec::with_capacity(raw.len());
            self.bounds.clear();
            for cell in cells {
                let start = text.len() as u32;
                match raw[cell.clone()].strip_prefix(b"\"").and_then(|cell| cell.strip_suffix(b"\"")) {
                    // Marks stand in pairs here; the first of each goes.
                    Some(quoted) => {
                        let mut marks = 0;
                        text.extend(quoted.iter().filter(|byte| {
                            marks = if **byte == b'"' { marks + 1 } else { 0 };
                            marks % 2 == 0
                        }));
                    }
                    None => text.extend_from_slice(&raw[cell]),
                }
                self.bounds.push((start, text.len() as u32));
            }
            taker.row(&Row { line: self.line, raw, text: &text, bounds: &self.bounds })?;
        }
        self.line += 1;
        let end = if bytes[length..].starts_with(b"\r\n") { length + 2 } else { (length + 1).min(bytes.len()) };
        ControlFlow::Continue(end)
    }

    fn by_the_csv_crate(&mut self, bytes: &[u8], last: bool, taker: &mut impl TakeRows) -> ControlFlow<()> {
        let mut reader = csv::ReaderBuilder::new().delimiter(self.separator).has_headers(false).flexible(true).from_reader(bytes);
        let mut record = csv::ByteRecord::new();
        let mut end = 0;
        // Reading from memory, with any number of cells allowed, the crate has no error to give.
        while let Ok(true) = reader.read_byte_record(&mut record) {
            let from = end;
            end = reader.position().byte() as usize;
            let start = from + bytes[from..end].iter().take_while(|byte| matches!(byte, b'\r' | b'\n')).count();
            self.line += count_lines(&bytes[from..start]);
            let raw = bytes[start..end].strip_suffix(b"\n").unwrap_or(&bytes[start..end]);
            let raw = raw.strip_suffix(b"\r").unwrap_or(raw);
            if end == bytes.len()
                && let Some(open) = spans(&bytes[start..end], self.separator).1
            {
                if last || end - start > LONGEST_LINE {
                    let before = &bytes[start..start + open];
                    self.broken = Some(Broken::OpenQuote(self.line, before.to_vec()));
                    return ControlFlow::Break(());
                }
                self.pending = bytes[start..].to_vec();
                return ControlFlow::Continue(());
            }
            self.bounds.clear();
            self.bounds
                .extend((0..record.len()).filter_map(|field| record.range(field)).map(|range| (range.start as u32, range.end as u32)));
            taker.row(&Row { line: self.line, raw, text: record.as_slice(), bounds: &self.bounds })?;
            self.line += count_lines(&bytes[start..end]);
            // The crate leaves the second half of CRLF to the next row; its line is counted by now.
            if bytes[..end].ends_with(b"\r") && bytes.get(end) == Some(&b'\n') {
                end += 1;
            }
        }
        self.line += count_lines(bytes.get(end..).unwrap_or(&[]));
        ControlFlow::Continue(())
    }
}

fn split(raw: &[u8], separator: u8, bounds: &mut Vec<(u32, u32)>) {
    bounds.clear();
    let mut start = 0;
    for (at, byte) in raw.iter().enumerate() {
        if *byte == separator {
            bounds.push((start, at as u32));
            start = at as u32 + 1;
        }
    }
    bounds.push((start, raw.len() as u32));
}

/// Where the cells of one row stand in its bytes, quotation marks included; and where a quotation mark opens that is never
/// closed. Follows the `csv` crate.
pub(super) fn spans(raw: &[u8], separator: u8) -> (Vec<Range<usize>>, Option<usize>) {
    let mut cells = Vec::new();
    let (mut start, mut at) = (0, 0);
    loop {
        if raw.get(at) == Some(&b'"') {
            at += 1;
            loop {
                match (raw.get(at), raw.get(at + 1)) {
                    (None, _) => {
                        cells.push(start..raw.len());
                        return (cells, Some(start));
                    }
                    (Some(b'"'), Some(b'"')) => at += 2,
                    (Some(b'"'), _) => break,
                    _ => at += 1,
                }
            }
            at += 1;
        }
        while at < raw.len() && raw[at] != separator {
            at += 1;
        }
        cells.push(start..at);
        if at == raw.len() {
            return (cells, None);
        }
        at += 1;
        start = at;
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    #[derive(Default)]
    struct Collect(Vec<Vec<Vec<u8>>>, Vec<usize>, Vec<usize>);

    impl TakeRows for Collect {
        fn quick(&mut self, _: &[u8], _: usize) -> (usize, usize) {
            (0, 0)
        }

        fn row(&mut self, row: &Row<'_>) -> ControlFlow<()> {
            let spans = spans(row.raw, b',').0;
            assert_eq!(spans.len(), row.len(), "{:?}", String::from_utf8_lossy(row.raw));
            self.0.push((0..row.len()).map(|field| row.cell(field).to_vec()).collect());
            self.1.push(row.line);
            ControlFlow::Continue(())
        }

        fn unclear(&mut self, line: usize) -> ControlFlow<()> {
            self.2.push(line);
            ControlFlow::Continue(())
        }
    }

    /// Gives its bytes in pieces.
    struct Pieces<'a>(&'a [u8], usize);

    impl Read for Pieces<'_> {
        fn read(&mut self, buffer: &mut [u8]) -> io::Result<usize> {
            let count = self.0.len().min(self.1).min(buffer.len());
            buffer[..count].copy_from_slice(&self.0[..count]);
            self.0 = &self.0[count..];
            Ok(count)
        }
    }

    fn by_csv(text: &[u8]) -> Vec<Vec<Vec<u8>>> {
        let mut reader = csv::ReaderBuilder::new().has_headers(false).flexible(true).from_reader(text);
        reader.byte_records().map(|record| record.unwrap().iter().map(<[u8]>::to_vec).collect()).collect()
    }

    proptest! {
        #![proptest_config(ProptestConfig::with_cases(2000))]
        #[test]
        fn rows_are_those_of_the_csv_crate(text in "[a,\"\r\n x]{0,60}", piece in 1_usize..9) {
            let mut taker = Collect::default();
            let broken = each_row(Pieces(text.as_bytes(), piece), b',', Rows::Quoted, &mut taker).unwrap();
            let mut expected = by_csv(text.as_bytes());
            if let Some(Broken::OpenQuote(..)) = broken {
                expected.pop();
            }
            prop_assert_eq!(taker.0, expected);
        }

        /// Where every mark stands around a whole cell, both ways of telling rows apart give the same.
        #[test]
        fn rows_on_one_line_are_those_of_the_csv_crate(rows in proptest::collection::vec(proptest::collection::vec("[a x]{0,3}|\"[a, x]{0,3}\"|\"(a|\"\"){0,3}\"", 1..4), 0..6), end in "\n|\r\n|\r") {
            let text: String = rows.iter().map(|row| format!("{}{end}", row.join(","))).collect();
            let mut taker = Collect::default();
            prop_assert_eq!(each_row(text.as_bytes(), b',', Rows::OneLine, &mut taker).unwrap(), None);
            prop_assert_eq!(&taker.2, &Vec::<usize>::new());
            prop_assert_eq!(taker.0, by_csv(text.as_bytes()));
        }

        #[test]
        fn lines_are_counted(rows in proptest::collection::vec("[a,x]{1,5}|\"a\n\"|\"\"\"\"", 1..20), end in "\n|\r\n|\r|\n\n") {
            let text: String = rows.iter().map(|row| format!("{row}{end}")).collect();
            let mut taker = Collect::default();
            prop_assert_eq!(each_row(text.as_bytes(), b',', Rows::Quoted, &mut taker).unwrap(), None);
            let mut line = 1;
            let per_end = if end == "\n\n" { 2 } else { 1 };
            for (row, found) in rows.iter().zip(&taker.1) {
                prop_assert_eq!(*found, line);
                line += row.matches('\n').count() + per_end;
            }
        }
    }

    #[test]
    fn a_quotation_mark_left_open_is_placed() {
        let mut taker = Collect::default();
        let broken = each_row(&b"a,b\n1,\"x\n2,y\n"[..], b',', Rows::Quoted, &mut taker).unwrap();
        assert_eq!(broken, Some(Broken::OpenQuote(2, b"1,".to_vec())));
    }

    #[test]
    fn a_mark_out_of_place_swallows_nothing_where_rows_stand_on_one_line() {
        let text = b"who,y,arm\ns1,\"5,c\ns2,5\",d\ns3,6\"6,c\ns4,\"7\"x,d\ns5,\"8\",\"c\"\"\"\n";
        let mut taker = Collect::default();
        assert_eq!(each_row(&text[..], b',', Rows::OneLine, &mut taker).unwrap(), None);
        assert_eq!(taker.2, [2, 3, 4, 5]);
        assert_eq!(taker.0[1], [&b"s5"[..], b"8", b"c\""]);
        assert_eq!(taker.1, [1, 6]);
    }

    #[test]
    fn a_quoted_line_end_may_fall_between_blocks() {
        let long = format!("a,\"{}\nend\"\nb,c\n", "x".repeat(300_000));
        let mut taker = Collect::default();
        assert_eq!(each_row(long.as_bytes(), b',', Rows::Quoted, &mut taker).unwrap(), None);
        assert_eq!(taker.0, by_csv(long.as_bytes()));
        assert_eq!(taker.1, [1, 3]);
    }
}
