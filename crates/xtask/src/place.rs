//! Where things are.

use std::env;
use std::ffi::OsString;
use std::path::{Path, PathBuf, absolute};

/// The workspace's own paths, all absolute.
pub struct Place {
    root: PathBuf,
}

impl Place {
    /// Two folders above this crate. Cargo says at run time where the crate is, so a copied tree finds itself.
    pub fn of_this_workspace() -> Self {
        let here = env::var_os("CARGO_MANIFEST_DIR").unwrap_or_else(|| env!("CARGO_MANIFEST_DIR").into());
        let root = Path::new(&here).ancestors().nth(2).unwrap_or(Path::new("."));
        Self { root: root.to_path_buf() }
    }

    /// The folder of the workspace's `Cargo.toml`.
    pub fn root(&self) -> &Path {
        &self.root
    }

    /// The virtual environment: under `target/` of the workspace, wherever cargo itself builds.
    pub fn venv(&self) -> PathBuf {
        self.root.join("target").join("venv")
    }

    /// The Python settings, dependencies among them.
    pub fn pyproject(&self) -> PathBuf {
        self.root.join("pyproject.toml")
    }

    /// The open data that `accuracy` compares with when nobody names a folder.
    pub fn open_data(&self) -> PathBuf {
        let beside = self.root.parent().unwrap_or(&self.root);
        beside.join("shared").join("data").join("sky130")
    }
}

/// The interpreter named in `HUSHRAIL_PYTHON`, when there is one; a path holds from any folder.
pub fn named_interpreter() -> Option<OsString> {
    let name = env::var_os("HUSHRAIL_PYTHON").filter(|name| !name.is_empty())?;
    let is_path = Path::new(&name).components().count() > 1;
    Some(absolute(&name).ok().filter(|_| is_path).map_or(name, PathBuf::into_os_string))
}

#[cfg(test)]
mod tests {
    use super::Place;

    #[test]
    fn root_holds_the_workspace() {
        let place = Place::of_this_workspace();
        assert!(place.root().join("Cargo.lock").is_file());
        assert!(place.root().join("crates").join("xtask").is_dir());
    }
}
