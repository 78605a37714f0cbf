//! From the paths on the command line to the files to be read: folders are walked, a file that
//! is named is taken whatever its name.

use crate::io::is_folder;
use ignore::WalkBuilder;
use std::path::{Path, PathBuf};

/// Endings of netlists, in any case.
const ENDINGS: [&str; 7] = ["cir", "ckt", "net", "iss", "inc", "lib", "sub"];

/// A path that could not be read, and why, in words.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct PathFault {
    /// The path, as shown.
    pub path: String,
    /// The reason.
    pub reason: String,
}

/// What the paths lead to.
#[derive(Clone, PartialEq, Eq, Debug, Default)]
pub struct Walk {
    /// Files, in the order of the arguments, sorted within each folder.
    pub files: Vec<PathBuf>,
    /// What could not be read.
    pub faults: Vec<PathFault>,
}

/// Walks `paths`; without any, the current folder, whose files then have no folder in front.
pub fn walk(paths: &[PathBuf]) -> Walk {
    let mut walk = Walk::default();
    if paths.is_empty() {
        walk.folder(Path::new("."));
        for file in &mut walk.files {
            if let Ok(bare) = file.strip_prefix(".") {
                *file = bare.to_path_buf();
            }
        }
    }
    for path in paths {
        walk.argument(path);
    }
    walk
}

impl Walk {
    fn argument(&mut self, path: &Path) {
        match is_folder(path) {
            Ok(true) => self.folder(path),
            Ok(false) => self.files.push(path.to_path_buf()),
            Err(fault) => self.fault(path, fault.to_string()),
        }
    }

    /// Netlists below a folder. Hidden and VCS-ignored entries and links are skipped.
    fn folder(&mut self, folder: &Path) {
        let before = self.files.len();
        let entries = WalkBuilder::new(folder)
            // Only version control decides; `.ignore` files belong to search tools.
            .ignore(false)
            .sort_by_file_path(Path::cmp)
            .build();
        for entry in entries {
            match entry {
                Ok(entry) => {
                    let regular = entry.file_type().is_some_and(|kind| kind.is_file());
                    if regular && is_netlist_name(entry.path()) {
                        self.files.push(entry.into_path());
                    }
                }
                Err(error) => self.fault(folder, error.to_string()),
            }
        }
        if self.files.len() == before {
            log::warn!("{}: no netlists in this folder", folder.display());
        }
    }

    fn fault(&mut self, path: &Path, reason: String) {
        self.faults.push(PathFault {
            path: path.display().to_string(),
            reason,
        });
    }
}

fn is_netlist_name(path: &Path) -> bool {
    ending(path).is_some_and(|ending| ENDINGS.contains(&ending.as_str()))
}

/// Whether a file is by its name a library or a part of another file, and has no title line.
pub fn is_library_name(path: &Path) -> bool {
    ending(path).is_some_and(|ending| matches!(ending.as_str(), "inc" | "lib" | "sub"))
}

fn ending(path: &Path) -> Option<String> {
    Some(path.extension()?.to_str()?.to_ascii_lowercase())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn endings_have_no_case() {
        assert!(is_netlist_name(Path::new("a/B.CIR")), "upper case counts");
        assert!(!is_netlist_name(Path::new("a/notes.txt")), "not a netlist");
        assert!(!is_netlist_name(Path::new("a/cir")), "a name, no ending");
        assert!(is_library_name(Path::new("x.Lib")), "upper case counts");
        assert!(!is_library_name(Path::new("x.cir")), "has a title");
    }
}
