//! What the virtual environment was made for, kept inside it.

use std::fs;
use std::path::{Path, PathBuf};

use crate::problem::Problem;

const NAME: &str = "hushrail-stamp.txt";

/// The record of a set-up.
#[derive(Debug, Default, PartialEq)]
pub struct Stamp {
    /// Where the environment was made: a moved one has wrong paths inside.
    pub made_at: String,
    /// Hash of the `pyproject.toml` whose packages are installed; none while that has not been done.
    pub installed: Option<u64>,
}

impl Stamp {
    /// The record in this environment, or nothing when there is none to trust.
    pub fn read(venv: &Path) -> Option<Self> {
        let text = fs::read_to_string(file(venv)).ok()?;
        let mut lines = text.lines();
        let made_at = lines.next()?.to_string();
        let installed = lines.next().and_then(|line| u64::from_str_radix(line, 16).ok());
        Some(Self { made_at, installed })
    }

    /// Leaves the record in the environment.
    pub fn write(&self, venv: &Path) -> Result<(), Problem> {
        let hash = self.installed.map(|hash| format!("{hash:016x}\n")).unwrap_or_default();
        let path = file(venv);
        fs::write(&path, format!("{}\n{hash}", self.made_at)).map_err(|source| Problem::File { path, source })
    }
}

fn file(venv: &Path) -> PathBuf {
    venv.join(NAME)
}

/// FNV-1a, 64 bit: the hash of RFC 9923, enough to notice an edit.
pub fn fnv1a(bytes: &[u8]) -> u64 {
    bytes.iter().fold(0xcbf2_9ce4_8422_2325, |hash, byte| {
        (hash ^ u64::from(*byte)).wrapping_mul(0x0000_0100_0000_01b3)
    })
}

#[cfg(test)]
mod tests {
    use super::{Stamp, fnv1a};

    /// Test vectors of the hash's authors.
    #[test]
    fn hash_agrees_with_its_published_vectors() {
        assert_eq!(fnv1a(b""), 0xcbf2_9ce4_8422_2325);
        assert_eq!(fnv1a(b"a"), 0xaf63_dc4c_8601_ec8c);
        assert_eq!(fnv1a(b"foobar"), 0x8594_4171_f739_67e8);
    }

    #[test]
    fn record_survives_the_disk() {
        let dir = std::env::temp_dir().join(format!("hushrail-stamp-{}", std::process::id()));
        std::fs::create_dir_all(&dir).expect("a temporary folder");
        for installed in [None, Some(7)] {
            let stamp = Stamp { made_at: "/some/where".into(), installed };
            stamp.write(&dir).expect("written");
            assert_eq!(Stamp::read(&dir), Some(stamp));
        }
        std::fs::remove_dir_all(&dir).expect("removed");
        assert_eq!(Stamp::read(&dir), None);
    }
}
