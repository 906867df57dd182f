//! `journal.ron`: what a run has found, line by line, while it is running.
//!
//! A branch reaches its file when it is finished; until then its events are only here. Each entry is
//! one line, handed to the operating system before the run goes on, so that a run that is killed loses
//! no event it has located. Each line is RON followed by a comment with the first 16 digits of its
//! SHA-256 sum; the last line may be torn and is then left out.

use std::fs::{self, File, OpenOptions};
use std::io::Write;
use std::path::{Path, PathBuf};

use serde::Deserialize;

use crate::branch_text::event_text;
use crate::error::Attempt;
use crate::pen::{Layout, Pen};
use crate::seal::{has_head, head, hex_sum};
use crate::{Event, RecordError};

pub(crate) const WHAT: &str = "journal";
const FORMAT: u32 = 1;
const SUM: &str = " // sha256 ";
/// 64 bits find any torn or damaged line; nobody forges a journal.
const SUM_DIGITS: usize = 16;

/// One line of a journal.
#[derive(Clone, Debug, PartialEq, Deserialize)]
#[serde(rename_all = "kebab-case", deny_unknown_fields)]
pub enum JournalEntry {
    /// An event was located; its name tells the branch.
    Event(Box<Event>),
    /// A branch is finished and in its file.
    Branch {
        /// Its name.
        name: String,
        /// How many points it has.
        points: usize,
    },
}

/// A journal as read back.
#[derive(Clone, Debug, PartialEq)]
pub struct JournalContent {
    /// All whole entries in the order of time.
    pub entries: Vec<JournalEntry>,
    /// Whether the last line was torn and left out.
    pub torn: bool,
}

/// A journal that entries can be added to.
#[derive(Debug)]
pub struct Journal {
    path: PathBuf,
    file: File,
}

impl Journal {
    /// Begins a journal, or continues the one that is there after cutting off a torn last line.
    ///
    /// # Errors
    /// What the machine refused, or what [`Journal::read`] finds wrong with the journal that is there.
    pub fn open(path: &Path) -> Result<Self, RecordError> {
        let fault = |source| RecordError::from_io(path, Attempt::Write, source);
        let whole = match fs::read(path) {
            Ok(bytes) => parse(path, &bytes)?.1,
            Err(_) => 0,
        };
        let file = OpenOptions::new().append(true).create(true).open(path).map_err(fault)?;
        file.set_len(whole as u64).map_err(fault)?;
        let mut journal = Self { path: path.to_path_buf(), file };
        if whole == 0 {
            journal.put(head(WHAT, FORMAT).as_bytes())?;
        }
        Ok(journal)
    }

    /// Adds one entry.
    ///
    /// # Errors
    /// What the machine refused.
    pub fn add(&mut self, entry: &JournalEntry) -> Result<(), RecordError> {
        let mut line = Vec::new();
        let fault = |source| RecordError::from_io(&self.path, Attempt::Write, source);
        entry_text(&mut Pen::new(&mut line, Layout::OneLine), entry).map_err(fault)?;
        let sum = hex_sum(&line);
        line.extend_from_slice(SUM.as_bytes());
        line.extend_from_slice(&sum.as_bytes()[..SUM_DIGITS]);
        line.push(b'\n');
        self.put(&line)
    }

    fn put(&mut self, bytes: &[u8]) -> Result<(), RecordError> {
        self.file.write_all(bytes).map_err(|source| RecordError::from_io(&self.path, Attempt::Write, source))
    }

    /// Reads a journal.
    ///
    /// # Errors
    /// [`RecordError::Format`], [`RecordError::Damaged`] or [`RecordError::Malformed`] for what cannot
    /// be the trace of a run that was cut short.
    pub fn read(path: &Path) -> Result<JournalContent, RecordError> {
        let bytes = fs::read(path).map_err(|source| RecordError::from_io(path, Attempt::Read, source))?;
        Ok(parse(path, &bytes)?.0)
    }
}

fn entry_text(pen: &mut Pen<'_>, entry: &JournalEntry) -> std::io::Result<()> {
    match entry {
        JournalEntry::Event(event) => {
            pen.raw("event(")?;
            event_text(pen, event)?;
            pen.raw(")")
        }
        JournalEntry::Branch { name, points } => {
            pen.raw("branch(")?;
            pen.name("name")?;
            pen.text(name)?;
            pen.raw(", ")?;
            pen.name("points")?;
            pen.count(*points)?;
            pen.raw(")")
        }
    }
}

/// The content, and the length of its whole lines in bytes.
fn parse(path: &Path, bytes: &[u8]) -> Result<(JournalContent, usize), RecordError> {
    let first = head(WHAT, FORMAT);
    let mut content = JournalContent { entries: Vec::new(), torn: false };
    if first.len() > bytes.len() && first.as_bytes().starts_with(bytes) {
        // Killed in the first instant.
        content.torn = !bytes.is_empty();
        return Ok((content, 0));
    }
    check_head(path, bytes, &first)?;
    let mut whole = first.len();
    let mut number = 1;
    while whole < bytes.len() {
        number += 1;
        let rest = &bytes[whole..];
        let end = rest.iter().position(|&byte| byte == b'\n').map(|end| end + 1);
        let is_last = end.is_none_or(|end| end == rest.len());
        match end.and_then(|end| line_body(&rest[..end])) {
            Some(body) => content.entries.push(parse_entry(path, number, body)?),
            None if is_last => {
                content.torn = true;
                break;
            }
            None => {
                let what = "a line before the last one does not fit its sum";
                return Err(RecordError::Damaged { path: path.to_path_buf(), what });
            }
        }
        whole += end.unwrap_or(rest.len());
    }
    Ok((content, whole))
}

fn check_head(path: &Path, bytes: &[u8], first: &str) -> Result<(), RecordError> {
    if bytes.starts_with(first.as_bytes()) {
        return Ok(());
    }
    let line = bytes.split(|&byte| byte == b'\n').next().unwrap_or_default();
    let version = std::str::from_utf8(line).ok().and_then(|line| line.rsplit(' ').next()?.parse().ok());
    match version {
        Some(found) if has_head(WHAT, bytes) => {
            Err(RecordError::Format { path: path.to_path_buf(), found, known: FORMAT })
        }
        _ => Err(RecordError::Malformed {
            path: path.to_path_buf(),
            line: 1,
            column: 1,
            what: format!("the first line must be `{}`", first.trim_end()),
        }),
    }
}

/// The RON of a line whose sum fits.
fn line_body(line: &[u8]) -> Option<&str> {
    let line = line.strip_suffix(b"\n")?;
    let (rest, digits) = line.split_at_checked(line.len().checked_sub(SUM_DIGITS)?)?;
    let body = rest.strip_suffix(SUM.as_bytes())?;
    let fits = hex_sum(body).as_bytes()[..SUM_DIGITS] == *digits;
    if fits { std::str::from_utf8(body).ok() } else { None }
}

fn parse_entry(path: &Path, line: usize, body: &str) -> Result<JournalEntry, RecordError> {
    ron::from_str(body).map_err(|error| RecordError::Malformed {
        path: path.to_path_buf(),
        line,
        column: error.span.start.col,
        what: error.code.to_string(),
    })
}
