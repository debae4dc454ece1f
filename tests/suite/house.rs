//! The rule of the house: a room imports only from rooms above it.

use std::path::{Path, PathBuf};

fn rooms() -> Vec<String> {
    let lib = std::fs::read_to_string(Path::new(env!("CARGO_MANIFEST_DIR")).join("src/lib.rs")).unwrap();
    lib.lines()
        .filter_map(|line| line.strip_prefix("pub mod ")?.strip_suffix(';'))
        .map(str::to_owned)
        .collect()
}

fn files(folder: &Path, found: &mut Vec<PathBuf>) {
    for entry in std::fs::read_dir(folder).unwrap().map(Result::unwrap) {
        let path = entry.path();
        if path.is_dir() {
            files(&path, found);
        } else if path.extension().is_some_and(|ending| ending == "rs") {
            found.push(path);
        }
    }
}

/// Rooms that a text names as `crate::room`, alone or in a braced list.
fn named(text: &str, rooms: &[String]) -> Vec<usize> {
    let mut found = Vec::new();
    for (at, _) in text.match_indices("crate::") {
        let rest = &text[at + "crate::".len()..];
        let list = match rest.strip_prefix('{') {
            Some(inner) => inner.split('}').next().unwrap_or(""),
            None => rest,
        };
        for part in list.split(',') {
            let word: String = part.trim().chars().take_while(|c| c.is_alphanumeric() || *c == '_').collect();
            found.extend(rooms.iter().position(|room| *room == word));
            if !rest.starts_with('{') {
                break;
            }
        }
    }
    found
}

#[test]
fn a_room_imports_only_from_rooms_above_it() {
    let rooms = rooms();
    assert!(rooms.len() > 15);
    let source = Path::new(env!("CARGO_MANIFEST_DIR")).join("src");
    let mut wrong = Vec::new();
    for (own, room) in rooms.iter().enumerate() {
        let mut all = Vec::new();
        files(&source.join(room), &mut all);
        assert!(!all.is_empty(), "{room} is no folder");
        for file in all {
            let text = std::fs::read_to_string(&file).unwrap();
            for other in named(&text, &rooms).into_iter().filter(|other| *other > own) {
                wrong.push(format!(
                    "{} imports from {}",
                    file.strip_prefix(&source).unwrap().display(),
                    rooms[other]
                ));
            }
        }
    }
    wrong.sort();
    wrong.dedup();
    assert!(wrong.is_empty(), "{wrong:#?}");
}

#[test]
fn imports_are_found_however_they_are_written() {
    let rooms: Vec<String> = ["source", "yaml", "part"].iter().map(|s| (*s).to_owned()).collect();
    assert_eq!(named("use crate::part::Part;\nlet x = crate::yaml::read();", &rooms), [2, 1]);
    assert_eq!(named("use crate::{source::File, part};", &rooms), [0, 2]);
    assert_eq!(named("use crate::partial;", &rooms), [] as [usize; 0]);
}

#[test]
fn files_can_be_read_in_one_sitting() {
    let mut all = Vec::new();
    files(&Path::new(env!("CARGO_MANIFEST_DIR")).join("src"), &mut all);
    for file in all {
        let lines = std::fs::read_to_string(&file).unwrap().lines().count();
        assert!(lines <= 700, "{} has {lines} lines", file.display());
    }
}
