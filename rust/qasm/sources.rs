//! The circuit's text and the files that it includes, loaded before reading starts.
//!
//! `stdgates.inc` and `qelib1.inc` are built in. Other files must lie in the folder of the circuit or below.

use std::collections::HashMap;
use std::path::Path;

/// Bytes of all included files together.
const MOST_BYTES: u64 = 1 << 28;
/// Included files.
const MOST_FILES: usize = 1000;

pub const STDGATES: &str = "stdgates.inc";
pub const QELIB1: &str = "qelib1.inc";

/// A file by the name in its include statement: its text, or why there is none.
pub type Files = HashMap<String, Result<String, String>>;

/// Loads what a text may include. Names inside comments count too; whether a file is needed shows while reading.
pub fn load(text: &str, folder: Option<&Path>) -> Files {
    let mut files = Files::new();
    let mut open: Vec<String> = quoted(text);
    let mut left = MOST_BYTES;
    while let Some(name) = open.pop() {
        if name == STDGATES || name == QELIB1 || files.contains_key(&name) || files.len() >= MOST_FILES {
            continue;
        }
        let found = fetch(&name, folder, left);
        if let Ok(text) = &found {
            left = left.saturating_sub(text.len() as u64);
            open.extend(quoted(text));
        }
        files.insert(name, found);
    }
    files
}

fn quoted(text: &str) -> Vec<String> {
    let after = text.match_indices("include").map(|(at, word)| text[at + word.len()..].trim_start());
    after
        .filter_map(|rest| {
            let quote = rest.chars().next().filter(|letter| matches!(letter, '"' | '\''))?;
            let line = rest[1..].split('\n').next()?;
            Some(line[..line.find(quote)?].to_owned())
        })
        .take(MOST_FILES)
        .collect()
}

fn fetch(name: &str, folder: Option<&Path>, left: u64) -> Result<String, String> {
    let Some(folder) = folder else {
        return Err("a circuit given as text includes the standard libraries only; give a path".into());
    };
    let outside = || "it lies outside of the circuit's folder; copy it there".to_string();
    let relative = Path::new(name);
    let plain = relative.components().all(|part| matches!(part, std::path::Component::Normal(_)));
    if name.is_empty() || !plain {
        return Err(outside());
    }
    let resolved = |path: &Path| path.canonicalize().map_err(|error| format!("it cannot be read: {error}"));
    let (root, path) = (resolved(folder)?, resolved(&folder.join(relative))?);
    if !path.starts_with(&root) {
        return Err(outside());
    }
    let size = path.metadata().map_err(|error| format!("it cannot be read: {error}"))?;
    if !size.is_file() || size.len() > left {
        return Err("it is no file, or larger than 256 MiB with the others; make it smaller".into());
    }
    let bytes = std::fs::read(&path).map_err(|error| format!("it cannot be read: {error}"))?;
    String::from_utf8(bytes).map_err(|_| "it is no UTF-8 text; save it as UTF-8".into())
}
