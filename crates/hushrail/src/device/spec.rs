//! A device described in a study file: compact, generic or tabulated.
//!
//! ```toml
//! [device.nlv]
//! generic = "generic 45 nm low power n"
//!
//! [device.nhv]
//! compact = { polarity = "n", vt0_v = 0.62, slope_n = 1.5, dibl_v_v = 0.06, body_sqrt_v = 0.4, phi_v = 0.9, mobility_m2_vs = 0.028, oxide_m = 1.8e-9 }
//!
//! [device.fin]
//! table = "fin.csv"
//! polarity = "n"
//! width_m = 1e-6
//! oxide_m = 1.4e-9
//! ```

use std::path::Path;
use std::sync::Arc;

use serde::{Deserialize, Deserializer, Serialize, Serializer};

use super::compact::CompactCard;
use super::compact::card::letter;
use super::table::{TableModel, TableOptions};
use super::{Device, Geometry, Polarity};
use crate::physics::Kelvin;
use crate::read::source::{Place, ReadError, Source};

/// One `[device.NAME]` table: exactly one of `compact`, `generic` and `table`.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct DeviceSpec {
    /// A compact device by its parameters.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub compact: Option<CompactCard>,
    /// A generic technology by its name; see [`super::compact::generic`].
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub generic: Option<String>,
    /// A CSV file of points, relative to the study; see [`super::table`].
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub table: Option<String>,
    /// Channel type of the table.
    #[serde(
        default,
        skip_serializing_if = "Option::is_none",
        serialize_with = "write_letter",
        deserialize_with = "read_letter"
    )]
    pub polarity: Option<Polarity>,
    /// Width of the transistor of the table, m.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub width_m: Option<f64>,
    /// Its length, m; with it other lengths are refused.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub length_m: Option<f64>,
    /// Electrical oxide thickness of the table's transistor, m.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub oxide_m: Option<f64>,
    /// Whether the table may be left.
    #[serde(default)]
    pub extrapolate: bool,
}

#[expect(clippy::trivially_copy_pass_by_ref, clippy::ref_option, reason = "the signature serde asks for")]
fn write_letter<S: Serializer>(p: &Option<Polarity>, s: S) -> Result<S::Ok, S::Error> {
    match p {
        Some(p) => letter::serialize(p, s),
        None => s.serialize_none(),
    }
}

fn read_letter<'de, D: Deserializer<'de>>(d: D) -> Result<Option<Polarity>, D::Error> {
    letter::deserialize(d).map(Some)
}

/// A device model read and checked, from which devices of any size and temperature are made.
#[derive(Debug, Clone)]
pub enum DeviceModel {
    /// Compact or generic.
    Compact(Box<CompactCard>),
    /// Tabulated.
    Table(Arc<TableModel>),
}

impl DeviceModel {
    /// Channel type.
    pub fn polarity(&self) -> Polarity {
        match self {
            Self::Compact(c) => c.polarity,
            Self::Table(t) => t.options().polarity,
        }
    }

    /// A device; `at` is where it is asked for.
    ///
    /// # Errors
    /// A size or temperature the model cannot give.
    pub fn make(&self, geometry: &Geometry, temp: Kelvin, at: &Place) -> Result<Arc<dyn Device>, ReadError> {
        match self {
            Self::Compact(c) => match c.device(geometry, temp) {
                Ok(d) => Ok(Arc::new(d)),
                Err(e) => Err(e.at(at)),
            },
            Self::Table(t) => match t.device(geometry, temp) {
                Ok(d) => Ok(Arc::new(d)),
                Err(e) => {
                    Err(ReadError::Range { at: at.clone(), name: e.name, value: e.value, wanted: e.wanted })
                }
            },
        }
    }
}

impl DeviceSpec {
    /// Reads and checks the model; relative paths start at `folder`, and `at` is where the device is described.
    ///
    /// # Errors
    /// No model or more than one, keys that belong to another kind, an unknown generic name, a value out of range, a table
    /// that cannot be read.
    pub fn load(&self, folder: &Path, at: &Place) -> Result<DeviceModel, ReadError> {
        let syntax = |found: String, wanted: &str| ReadError::Syntax {
            at: at.clone(),
            found,
            wanted: wanted.to_owned(),
        };
        let given: Vec<&str> = [
            ("compact", self.compact.is_some()),
            ("generic", self.generic.is_some()),
            ("table", self.table.is_some()),
        ]
        .iter()
        .filter(|(_, given)| *given)
        .map(|(name, _)| *name)
        .collect();
        if given.len() != 1 {
            let found = match given[..] {
                [] => "the device names no model".to_owned(),
                _ => format!("the device names {} models: `{}`", given.len(), given.join("`, `")),
            };
            return Err(syntax(found, "want one of `compact`, `generic`, `table`"));
        }
        if let Some(path) = &self.table {
            let missing = |key: &str, what: &str| {
                syntax(format!("the table `{path}` has no `{key}`"), &format!("want {what}"))
            };
            let options = TableOptions {
                polarity: self.polarity.ok_or_else(|| missing("polarity", "`n` or `p`"))?,
                width_m: self
                    .width_m
                    .ok_or_else(|| missing("width_m", "the width of its transistor in metres"))?,
                length_m: self.length_m,
                oxide_m: self.oxide_m.ok_or_else(|| {
                    missing(
                        "oxide_m",
                        "its electrical oxide thickness in metres, for the stress of a driven gate",
                    )
                })?,
                extrapolate: self.extrapolate,
            };
            let model = TableModel::read(&Source::open(&folder.join(path))?, options)?;
            return Ok(DeviceModel::Table(Arc::new(model)));
        }
        for (key, stands) in [
            ("polarity", self.polarity.is_some()),
            ("width_m", self.width_m.is_some()),
            ("length_m", self.length_m.is_some()),
            ("oxide_m", self.oxide_m.is_some()),
            ("extrapolate", self.extrapolate),
        ] {
            if stands {
                let found = format!("`{key}` stands beside `{}`", given[0]);
                return Err(syntax(
                    found,
                    "it belongs to `table`; leave it out or write it inside `compact`",
                ));
            }
        }
        let card = match (&self.compact, &self.generic) {
            (Some(card), _) => card.clone(),
            (_, name) => CompactCard::generic(name.as_deref().unwrap_or("")).map_err(|e| e.at(at))?,
        };
        card.check().map_err(|e| e.at(at))?;
        Ok(DeviceModel::Compact(Box::new(card)))
    }

    /// Reads the model and makes one device of it. To make many, [`load`](Self::load) once.
    ///
    /// # Errors
    /// Those of [`load`](Self::load) and [`DeviceModel::make`].
    pub fn make(
        &self,
        folder: &Path,
        geometry: &Geometry,
        temp: Kelvin,
    ) -> Result<Arc<dyn Device>, ReadError> {
        let at = Place::new(&Arc::from("device"), 1, 1);
        self.load(folder, &at)?.make(geometry, temp, &at)
    }
}
