//! Data flows one way: a room may use the rooms to its left, never to its right.

use std::path::Path;

const ROOMS: [&str; 15] = [
    "physics",
    "corner",
    "read",
    "device",
    "circuit",
    "cell",
    "states",
    "block",
    "standby",
    "awake",
    "transition",
    "optimum",
    "check",
    "batch",
    "lib",
];

fn files(dir: &Path, out: &mut Vec<std::path::PathBuf>) {
    for e in std::fs::read_dir(dir).expect("source folder").map(|e| e.expect("entry").path()) {
        if e.is_dir() {
            files(&e, out);
        } else if e.extension().is_some_and(|x| x == "rs") {
            out.push(e);
        }
    }
}

#[test]
fn no_room_reaches_to_its_right() {
    let src = Path::new(env!("CARGO_MANIFEST_DIR")).join("src");
    let mut all = Vec::new();
    files(&src, &mut all);
    let mut wrong = Vec::new();
    for f in all {
        let rel = f.strip_prefix(&src).expect("below src");
        let first = rel.components().next().expect("a part").as_os_str().to_string_lossy().replace(".rs", "");
        let own =
            ROOMS.iter().position(|r| *r == first).unwrap_or_else(|| panic!("room `{first}` has no place"));
        for (n, line) in std::fs::read_to_string(&f).expect("text").lines().enumerate() {
            if line.trim_start().starts_with("//") {
                continue;
            }
            for piece in line.split("crate::").skip(1) {
                let room: String = piece.chars().take_while(|c| c.is_alphanumeric() || *c == '_').collect();
                if let Some(to) = ROOMS.iter().position(|r| *r == room)
                    && to > own
                {
                    wrong.push(format!("{}:{}: `{first}` uses `{room}`", rel.display(), n + 1));
                }
            }
        }
    }
    assert!(wrong.is_empty(), "{}", wrong.join("\n"));
}
