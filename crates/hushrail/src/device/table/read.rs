//! The points of a device table: a CSV file on a full grid.

use crate::device::Polarity;
use crate::physics::{CELSIUS_ZERO_K, Kelvin, TEMP_RANGE_C};
use crate::read::source::{Place, ReadError, Source, nearest};

/// Columns of the file, in any order: voltages over the source, temperature, currents into drain, gate and body.
pub const COLUMNS: [&str; 7] = ["vg_v", "vd_v", "vb_v", "temp_c", "id_a", "ig_a", "ib_a"];

/// Grid values nearer than this are one: a microvolt, a microkelvin.
const SAME: f64 = 1e-6;

/// The points, voltages and currents turned to those of an n-channel device.
#[derive(Debug, Clone)]
pub struct Points {
    /// Gate, drain and body voltages, V, rising.
    pub axes: [Vec<f64>; 3],
    /// Temperatures, K, rising.
    pub temps_k: Vec<f64>,
    /// Currents into drain, gate and body, A: for each temperature, gate slowest and body fastest.
    pub currents: Vec<Vec<[f64; 3]>>,
    /// Line of each point, in the same order.
    pub lines: Vec<Vec<usize>>,
    /// Most digits any current is written with.
    pub digits: usize,
}

struct Row {
    line: usize,
    v: [f64; 7],
}

fn syntax(source: &Source, line: usize, found: String, wanted: impl Into<String>) -> ReadError {
    ReadError::Syntax { at: Place::new(&source.path, line, 1), found, wanted: wanted.into() }
}

/// Digits of the mantissa of a number as written, leading zeros not counted.
fn digits(text: &str) -> usize {
    let mantissa = text.split(['e', 'E']).next().unwrap_or("");
    let plain: String = mantissa.chars().filter(char::is_ascii_digit).collect();
    plain.trim_start_matches('0').len()
}

fn rows(source: &Source, polarity: Polarity) -> Result<(Vec<Row>, usize), ReadError> {
    let text = source.text.strip_prefix('\u{feff}').unwrap_or(&source.text);
    let mut reader = csv::ReaderBuilder::new()
        .has_headers(false)
        .flexible(true)
        .trim(csv::Trim::All)
        .from_reader(text.as_bytes());
    let mut record = csv::StringRecord::new();
    let mut next = |record: &mut csv::StringRecord| {
        let more = reader
            .read_record(record)
            .map_err(|e| syntax(source, 1, e.to_string(), "want a table of comma-separated values"))?;
        let line = record.position().map_or(1, |p| usize::try_from(p.line()).unwrap_or(usize::MAX));
        Ok::<_, ReadError>((more, line))
    };
    let (more, line) = next(&mut record)?;
    if !more {
        return Err(source.nothing("table of device currents"));
    }
    let header = COLUMNS.join(",");
    let mut columns = [None; 7];
    for (i, name) in record.iter().enumerate() {
        let Some(k) = COLUMNS.iter().position(|c| *c == name) else {
            return Err(ReadError::Unknown {
                at: Place::new(&source.path, line, 1),
                kind: "column",
                name: name.to_owned(),
                nearest: nearest(name, COLUMNS).or_else(|| Some(header.clone())),
            });
        };
        if columns[k].replace(i).is_some() {
            return Err(syntax(
                source,
                line,
                format!("column `{name}` stands twice"),
                format!("want {header}"),
            ));
        }
    }
    let mut place = [0; 7];
    for (k, c) in columns.iter().enumerate() {
        place[k] = c.ok_or_else(|| {
            syntax(source, line, format!("column `{}` is missing", COLUMNS[k]), format!("want {header}"))
        })?;
    }

    let sign = polarity.sign();
    let mut out = Vec::new();
    let mut most_digits = 0;
    loop {
        let (more, line) = next(&mut record)?;
        if !more {
            break;
        }
        if record.len() != 7 {
            let found = format!("this row has {} fields", record.len());
            return Err(syntax(source, line, found, format!("want seven: {header}")));
        }
        let mut v = [0.0; 7];
        for (k, name) in COLUMNS.iter().enumerate() {
            let field = record.get(place[k]).unwrap_or_default();
            v[k] = field.parse().ok().filter(|x: &f64| x.is_finite()).ok_or_else(|| {
                syntax(
                    source,
                    line,
                    format!("`{name}` is `{field}`"),
                    "want a finite number, such as 1.5e-12",
                )
            })?;
            if k >= 4 {
                most_digits = most_digits.max(digits(field));
            }
            if k != 3 {
                // adding zero turns −0 into 0
                v[k] = v[k] * sign + 0.0;
                if k < 3 && v[k].abs() < SAME {
                    v[k] = 0.0; // what a loop in steps of 0.1 makes of it
                }
            }
        }
        if v[1] < 0.0 {
            return Err(ReadError::Range {
                at: Place::new(&source.path, line, 1),
                name: "vd_v".into(),
                value: format!("{} V", v[1] * sign),
                wanted: format!(
                    "want {} for {}-channel: the other side follows by exchanging drain and source",
                    if sign > 0.0 { "0 or above" } else { "0 or below" },
                    if sign > 0.0 { "n" } else { "p" }
                ),
            });
        }
        v[3] = Kelvin::from_celsius(v[3])
            .map_err(|e| ReadError::Range {
                at: Place::new(&source.path, line, 1),
                name: "temp_c".into(),
                value: format!("{} °C", e.temp_c),
                wanted: format!("want {} to {} °C", TEMP_RANGE_C.0, TEMP_RANGE_C.1),
            })?
            .get();
        out.push(Row { line, v });
    }
    if out.is_empty() {
        return Err(source.nothing("points below the header"));
    }
    Ok((out, most_digits))
}

/// Distinct values, rising.
fn axis(rows: &[Row], k: usize) -> Vec<f64> {
    let mut all: Vec<f64> = rows.iter().map(|r| r.v[k]).collect();
    all.sort_by(f64::total_cmp);
    all.dedup_by(|b, a| *b - *a < SAME);
    all
}

fn index(axis: &[f64], x: f64) -> usize {
    axis.partition_point(|&a| a <= x + SAME / 2.0).saturating_sub(1)
}

/// Reads the points; rows may stand in any order.
///
/// # Errors
/// Text that is not this table, a number that is not finite, a point that stands twice or is missing, a gate or drain axis
/// of one value, a drain axis without 0 V.
pub fn read_points(source: &Source, polarity: Polarity) -> Result<Points, ReadError> {
    let (rows, digits) = rows(source, polarity)?;
    let sign = polarity.sign();
    let axes: [Vec<f64>; 3] = std::array::from_fn(|k| axis(&rows, k));
    let temps_k = axis(&rows, 3);
    for (k, a) in axes.iter().enumerate().take(2) {
        if a.len() < 2 {
            let found = format!("`{}` has one value, {} V", COLUMNS[k], a[0] * sign);
            return Err(syntax(source, 1, found, "want at least two, and enough to draw the curve"));
        }
    }
    if axes[1][0] > 0.0 {
        let found = format!("`vd_v` starts at {} V", axes[1][0] * sign);
        let wanted = "want 0 V among the drain voltages: it tells the currents of the two ends apart";
        return Err(syntax(source, 1, found, wanted));
    }
    let plane = axes.iter().map(Vec::len).try_fold(1usize, usize::checked_mul);
    let total = plane.and_then(|p| p.checked_mul(temps_k.len()));
    let lines_of_grid = format!(
        "{} gate × {} drain × {} body × {} temperature values",
        axes[0].len(),
        axes[1].len(),
        axes[2].len(),
        temps_k.len()
    );
    let (Some(plane), Some(total)) = (plane, total) else {
        return Err(syntax(source, 1, format!("the grid has {lines_of_grid}"), "want a full grid"));
    };
    // more points than rows: find one that is missing without laying out the grid
    let mut lines = vec![vec![0usize; 0]; temps_k.len()];
    let mut currents = vec![vec![[0.0; 3]; 0]; temps_k.len()];
    let short = total > rows.len();
    let mut seen = rustc_hash::FxHashMap::default();
    let cell = |r: &Row| {
        let i: [usize; 3] = std::array::from_fn(|k| index(&axes[k], r.v[k]));
        ((i[0] * axes[1].len() + i[1]) * axes[2].len() + i[2], index(&temps_k, r.v[3]))
    };
    for r in &rows {
        if let Some(first) = seen.insert(cell(r), r.line) {
            let found = format!(
                "the point vg_v = {}, vd_v = {}, vb_v = {}, temp_c = {:.3} stands twice, first in line {first}",
                r.v[0] * sign,
                r.v[1] * sign,
                r.v[2] * sign,
                r.v[3] - CELSIUS_ZERO_K
            );
            return Err(syntax(source, r.line, found, "want one row a point"));
        }
    }
    if short {
        let last = rows.last().map_or(1, |r| r.line);
        let hole = (0..temps_k.len())
            .flat_map(|t| (0..plane).map(move |p| (p, t)))
            .find(|key| !seen.contains_key(key))
            .unwrap_or((0, 0));
        let (p, t) = hole;
        let (d, b) = (axes[1].len(), axes[2].len());
        let found = format!(
            "no row for vg_v = {}, vd_v = {}, vb_v = {}, temp_c = {:.3}; {} of {total} points are missing",
            axes[0][p / (d * b)] * sign,
            axes[1][p / b % d] * sign,
            axes[2][p % b] * sign,
            temps_k[t] - CELSIUS_ZERO_K,
            total - rows.len()
        );
        return Err(syntax(source, last, found, format!("want the full grid of {lines_of_grid}")));
    }
    for t in 0..temps_k.len() {
        lines[t] = vec![0; plane];
        currents[t] = vec![[0.0; 3]; plane];
    }
    for r in &rows {
        let (p, t) = cell(r);
        lines[t][p] = r.line;
        currents[t][p] = [r.v[4], r.v[5], r.v[6]];
    }
    Ok(Points { axes, temps_k, currents, lines, digits })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn digits_count_the_mantissa_only() {
        for (text, want) in [("1.5e-12", 2), ("-0.00120", 3), ("0", 0), ("1.234567E-9", 7), ("12", 2)] {
            assert_eq!(digits(text), want, "{text}");
        }
    }
}
