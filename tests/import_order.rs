//! The rooms of the crate stand in `lib.rs` in reading order; an import may only point to a room above.

use std::fs;
use std::path::{Path, PathBuf};

fn rooms() -> Vec<String> {
    let lib = fs::read_to_string("src/lib.rs").expect("lib.rs is there");
    let named = lib.lines().filter_map(|line| {
        line.trim_start_matches("pub(crate) ").trim_start_matches("pub ").strip_prefix("mod ")?.strip_suffix(';')
    });
    named.map(str::to_owned).collect()
}

fn sources(folder: &Path, found: &mut Vec<PathBuf>) {
    for entry in fs::read_dir(folder).expect("a folder of sources").flatten() {
        let path = entry.path();
        if path.is_dir() {
            sources(&path, found);
        } else if path.extension().is_some_and(|e| e == "rs") {
            found.push(path);
        }
    }
}

/// The rooms that a source names behind `crate::`, alone or in a braced list.
fn imports(text: &str) -> Vec<String> {
    let mut rooms = Vec::new();
    for (at, _) in text.match_indices("crate::") {
        let rest = &text[at + "crate::".len()..];
        let word = |s: &str| s.chars().take_while(|c| c.is_alphanumeric() || *c == '_').collect::<String>();
        if let Some(list) = rest.strip_prefix('{') {
            let mut depth = 1;
            let mut item = String::new();
            for c in list.chars() {
                match c {
                    '{' => depth += 1,
                    '}' => depth -= 1,
                    ',' if depth == 1 => {
                        rooms.push(word(item.trim()));
                        item.clear();
                        continue;
                    }
                    _ => {}
                }
                if depth == 0 {
                    break;
                }
                item.push(c);
            }
            rooms.push(word(item.trim()));
        } else {
            rooms.push(word(rest));
        }
    }
    rooms
}

#[test]
fn arrows_point_up_the_page_only() {
    let rooms = rooms();
    assert!(rooms.len() > 10, "the list of rooms was not found");
    let place = |name: &str| rooms.iter().position(|r| r == name);
    let mut files = Vec::new();
    sources(Path::new("src"), &mut files);
    let mut faults = Vec::new();
    let mut arrows = 0;
    for file in files {
        let inside = file.strip_prefix("src").expect("found there");
        let room = inside.iter().next().and_then(|c| c.to_str()).unwrap_or("").trim_end_matches(".rs");
        let Some(own) = place(room) else { continue };
        let text = fs::read_to_string(&file).expect("readable");
        let code = text.lines().filter(|l| !l.trim_start().starts_with("//")).collect::<Vec<_>>().join("\n");
        for target in imports(&code) {
            let Some(other) = place(&target) else { continue };
            arrows += 1;
            if other > own {
                faults.push(format!("{} imports {target}, which stands below {room}", file.display()));
            }
        }
    }
    assert!(arrows > 20, "imports were not found");
    assert!(faults.is_empty(), "{}", faults.join("\n"));
}

#[test]
fn braced_lists_are_read() {
    let text = "use crate::{error::{Error, Result}, legendre, operator as op};\nuse crate::mesh::Mesh;";
    assert_eq!(imports(text), ["error", "legendre", "operator", "mesh"]);
}
