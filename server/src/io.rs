//! The only file access: bytes in from files and standard input, result bytes out to standard
//! output. Devices, pipes, sockets and folders are refused before they are opened, so that a
//! netlist cannot make the program wait or read without end.

use squeg_analyzer::host::SourceText;
use std::fmt;
use std::fs::{File, FileType};
use std::io::{self, ErrorKind, Read, Write};
use std::path::{Component, Path, PathBuf};

/// Why a file was not read.
#[derive(Debug)]
pub enum ReadFault {
    /// Nothing is there.
    NotFound,
    /// It is a folder.
    Folder,
    /// It is neither a file nor a folder; what it is.
    Special(&'static str),
    /// It is larger than the limit allows.
    TooLarge {
        /// Its size in bytes, as far as it is known.
        bytes: u64,
        /// The limit in bytes.
        limit: u64,
    },
    /// The system refused.
    System(ErrorKind),
}

impl fmt::Display for ReadFault {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::NotFound => f.write_str("no such file"),
            Self::Folder => f.write_str("it is a folder"),
            Self::Special(what) => write!(f, "it is a {what}, not a regular file"),
            Self::TooLarge { bytes, limit } => write!(
                f,
                "its size of {} is above the limit of {} (`file-bytes`)",
                mebibytes(*bytes),
                mebibytes(*limit)
            ),
            Self::System(kind) => write!(f, "{kind}"),
        }
    }
}

impl From<io::Error> for ReadFault {
    fn from(error: io::Error) -> Self {
        match error.kind() {
            ErrorKind::NotFound => Self::NotFound,
            kind => Self::System(kind),
        }
    }
}

fn mebibytes(bytes: u64) -> String {
    let value = bytes as f64 / f64::from(1u32 << 20);
    if bytes.is_multiple_of(1 << 20) {
        format!("{value} MiB")
    } else {
        format!("{value:.3} MiB")
    }
}

/// Reads a regular file of at most `limit` bytes.
///
/// # Errors
/// See [`ReadFault`].
pub fn read_file(path: &Path, limit: usize) -> Result<SourceText, ReadFault> {
    // Opening a pipe may block for ever: look before, and once more at what was opened.
    check_kind(std::fs::metadata(path)?.file_type())?;
    let file = File::open(path)?;
    let metadata = file.metadata()?;
    check_kind(metadata.file_type())?;
    if metadata.len() > limit as u64 {
        return Err(too_large(metadata.len(), limit));
    }
    read_bounded(file, limit)
}

/// Reads standard input to its end, at most `limit` bytes.
///
/// # Errors
/// [`ReadFault::TooLarge`] or [`ReadFault::System`].
pub fn read_stdin(limit: usize) -> Result<SourceText, ReadFault> {
    read_bounded(io::stdin().lock(), limit)
}

fn read_bounded(source: impl Read, limit: usize) -> Result<SourceText, ReadFault> {
    let mut bytes = Vec::new();
    // One byte more tells a text that fits from one that does not.
    source
        .take((limit as u64).saturating_add(1))
        .read_to_end(&mut bytes)?;
    if bytes.len() > limit {
        return Err(too_large(bytes.len() as u64, limit));
    }
    Ok(SourceText::from_bytes(&bytes))
}

fn too_large(bytes: u64, limit: usize) -> ReadFault {
    ReadFault::TooLarge {
        bytes,
        limit: limit as u64,
    }
}

fn check_kind(kind: FileType) -> Result<(), ReadFault> {
    if kind.is_file() {
        Ok(())
    } else if kind.is_dir() {
        Err(ReadFault::Folder)
    } else {
        Err(ReadFault::Special(special_name(kind)))
    }
}

#[cfg(unix)]
fn special_name(kind: FileType) -> &'static str {
    use std::os::unix::fs::FileTypeExt;
    if kind.is_fifo() {
        "pipe"
    } else if kind.is_socket() {
        "socket"
    } else {
        "device"
    }
}

#[cfg(not(unix))]
fn special_name(_kind: FileType) -> &'static str {
    "device"
}

/// The one name of a file that may be reached by several paths.
///
/// # Errors
/// Whatever the system says, such as that nothing is there.
pub fn real_path(path: &Path) -> Result<PathBuf, ReadFault> {
    Ok(std::fs::canonicalize(path)?)
}

/// Whether a path leads to a folder.
///
/// # Errors
/// Whatever the system says, such as that nothing is there.
pub fn is_folder(path: &Path) -> Result<bool, ReadFault> {
    Ok(std::fs::metadata(path)?.is_dir())
}

/// Where an include written in a file of `folder` leads: relative to that folder. Backslashes
/// separate folders when nothing is there under the name as it stands.
pub fn include_path(folder: &Path, written: &str) -> PathBuf {
    let path = folder.join(written);
    if written.contains('\\') && !path.exists() {
        return folder.join(written.replace('\\', "/"));
    }
    path
}

/// `path` without the detours `a/..` and `a/.` in it, if that still leads to the file `real`:
/// past a link it may not. A path that begins with `.` or `..` goes on to do so.
pub fn shortened(path: &Path, real: &Path) -> PathBuf {
    let mut short = PathBuf::new();
    for component in path.components() {
        let after_name = matches!(short.components().next_back(), Some(Component::Normal(_)));
        if component == Component::ParentDir && after_name {
            short.pop();
        } else {
            short.push(component);
        }
    }
    match real_path(&short) {
        Ok(same) if same == real => short,
        _ => path.to_path_buf(),
    }
}

/// Writes a result to standard output. A reader that has gone away wants no more: that is no
/// failure.
///
/// # Errors
/// Any other failure to write.
pub fn write_stdout(bytes: &[u8]) -> io::Result<()> {
    let mut out = io::stdout().lock();
    match out.write_all(bytes).and_then(|()| out.flush()) {
        Err(error) if error.kind() == ErrorKind::BrokenPipe => Ok(()),
        other => other,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn reads_up_to_the_limit_and_not_beyond() {
        let fits = read_bounded(&b"abcd"[..], 4).map(|source| source.text.to_string());
        assert_eq!(fits.ok().as_deref(), Some("abcd"));
        let text = read_bounded(&b"abcde"[..], 4).map_err(|fault| fault.to_string());
        assert!(
            text.is_err_and(|fault| fault.contains("`file-bytes`")),
            "the fault names the key of the limit"
        );
    }

    #[test]
    fn sizes_read_well() {
        assert_eq!(mebibytes(64 << 20), "64 MiB");
        assert_eq!(mebibytes((64 << 20) + 2048), "64.002 MiB");
    }

    #[cfg(unix)]
    #[test]
    fn devices_and_folders_are_refused_by_kind() {
        let refused = |path: &str| {
            read_file(Path::new(path), 1 << 20)
                .err()
                .map(|fault| fault.to_string())
        };
        let device = "it is a device, not a regular file";
        assert_eq!(refused("/dev/null").as_deref(), Some(device));
        assert_eq!(refused("/").as_deref(), Some("it is a folder"));
        assert_eq!(refused("/no/such").as_deref(), Some("no such file"));
    }
}
