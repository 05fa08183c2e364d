//! The virtual environment in `target/venv`.

use std::env;
use std::path::{Path, PathBuf};
use std::process::Command;

use crate::child;
use crate::place::Place;

/// A virtual environment; it may not exist yet.
pub struct Venv {
    dir: PathBuf,
    root: PathBuf,
}

impl Venv {
    /// The one of this workspace.
    pub fn of(place: &Place) -> Self {
        Self { dir: place.venv(), root: place.root().to_path_buf() }
    }

    /// Its folder.
    pub fn dir(&self) -> &Path {
        &self.dir
    }

    fn programs(&self) -> PathBuf {
        self.dir.join(if cfg!(windows) { "Scripts" } else { "bin" })
    }

    /// Its interpreter, as an activated shell would start it: from the workspace's root, this environment first.
    pub fn python(&self) -> Command {
        let programs = self.programs();
        let mut python = child::command(programs.join(if cfg!(windows) { "python.exe" } else { "python" }));
        let outer = env::var_os("PATH").unwrap_or_default();
        if let Ok(path) = env::join_paths([programs].into_iter().chain(env::split_paths(&outer))) {
            python.env("PATH", path);
        }
        python.env("VIRTUAL_ENV", &self.dir).current_dir(&self.root);
        python
    }

    /// `python -m NAME`: works in a copied environment too, where the scripts name the old place.
    pub fn module(&self, name: &str) -> Command {
        let mut python = self.python();
        python.args(["-m", name]);
        python
    }
}
