//! Rows of a published table that contradict physics or other rows, and rows that the prediction contradicts, ranked.
//!
//! Rules, each by comparing a row with the same state elsewhere: leakage must not fall with supply, not with temperature, not
//! with drive strength; two corners of one card set at the same supply and temperature must agree; the states of a cell with
//! inputs are not all equal. How far a row breaks a rule is its severity, in decades. Finding nothing does not prove a row
//! right.

use indexmap::IndexMap;
use serde::{Deserialize, Serialize};

use super::compare::{Compared, PublishedCorner, PublishedRow};

/// Slack of the rules; the defaults are the ones the open data set was searched with.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct SuspectRules {
    /// Excess over the same state at a higher supply, temperature or drive that is let pass.
    pub monotone: f64,
    /// Disagreement of twins that is let pass.
    pub twin: f64,
    /// Ratio of prediction and table that is let pass.
    pub prediction: f64,
    /// Processes of the table that are one card set.
    pub same_cards: Vec<Vec<String>>,
}

impl Default for SuspectRules {
    fn default() -> Self {
        Self { monotone: 0.20, twin: 0.01, prediction: 0.10, same_cards: Vec::new() }
    }
}

/// One row under suspicion.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Suspect {
    /// Cell.
    pub cell: String,
    /// Corner.
    pub corner: String,
    /// Condition.
    pub when: String,
    /// Published, nW.
    pub published_nw: f64,
    /// How far the worst broken rule is broken, decades.
    pub severity: f64,
    /// Every broken rule, in words.
    pub reasons: Vec<String>,
    /// Whether the table contradicts itself here (and not only the prediction).
    pub contradicts_table: bool,
}

/// Family and drive of a cell name such as `nand2_4`.
fn family(cell: &str) -> Option<(&str, u32)> {
    let (base, drive) = cell.rsplit_once('_')?;
    Some((base, drive.parse().ok()?))
}

/// Searches a table; `compared` adds the rows that the prediction contradicts.
pub fn find_suspects(
    rows: &[PublishedRow],
    corners: &[PublishedCorner],
    compared: Option<&Compared>,
    rules: &SuspectRules,
) -> Vec<Suspect> {
    let corner: IndexMap<&str, &PublishedCorner> = corners.iter().map(|c| (c.name.as_str(), c)).collect();
    let set = |process: &str| {
        rules
            .same_cards
            .iter()
            .find(|s| s.iter().any(|p| p == process))
            .and_then(|s| s.first().cloned())
            .unwrap_or_else(|| process.to_owned())
    };
    let mut found: IndexMap<usize, Suspect> = IndexMap::new();
    let mut suspect = |i: usize, factor: f64, reason: String, table: bool| {
        let r = &rows[i];
        let s = found.entry(i).or_insert_with(|| Suspect {
            cell: r.cell.clone(),
            corner: r.corner.clone(),
            when: r.when.clone(),
            published_nw: r.power_w * 1e9,
            severity: 0.0,
            reasons: Vec::new(),
            contradicts_table: false,
        });
        s.severity = s.severity.max(factor.log10().abs());
        s.reasons.push(reason);
        s.contradicts_table |= table;
    };

    // the same state at other corners
    let mut states: IndexMap<(&str, &str), Vec<usize>> = IndexMap::new();
    for (i, r) in rows.iter().enumerate() {
        states.entry((&r.cell, &r.when)).or_default().push(i);
    }
    for list in states.values() {
        for &i in list {
            let Some(ci) = corner.get(rows[i].corner.as_str()) else { continue };
            let mut worst: Option<(f64, String)> = None;
            for &j in list {
                let Some(cj) = corner.get(rows[j].corner.as_str()) else { continue };
                if i == j || rows[j].power_w <= 0.0 || set(&ci.process) != set(&cj.process) {
                    continue;
                }
                let x = rows[i].power_w / rows[j].power_w;
                let (hotter, higher) = (cj.temp_c > ci.temp_c, cj.vdd_v > ci.vdd_v);
                let (as_hot, as_high) = (cj.temp_c == ci.temp_c, cj.vdd_v == ci.vdd_v);
                let twin = as_hot && as_high && x > 1.0 + rules.twin;
                let what = if twin {
                    "its twin at the same supply and temperature"
                } else if as_hot && higher && x > 1.0 + rules.monotone {
                    "a higher supply"
                } else if hotter && (as_high || higher) && x > 1.0 + rules.monotone {
                    "a higher temperature"
                } else {
                    continue;
                };
                if worst.as_ref().is_none_or(|(w, _)| x > *w) {
                    worst = Some((x, format!("{x:.3} times {} ({what})", cj.name)));
                }
            }
            if let Some((x, text)) = worst {
                suspect(i, x, text, true);
            }
        }
    }

    // the same state of a stronger cell
    let mut drives: IndexMap<(&str, &str, &str), Vec<(u32, usize)>> = IndexMap::new();
    for (i, r) in rows.iter().enumerate() {
        if let Some((base, drive)) = family(&r.cell) {
            drives.entry((base, &r.when, &r.corner)).or_default().push((drive, i));
        }
    }
    for list in drives.values() {
        for &(weak, i) in list {
            let worst = list
                .iter()
                .filter(|(strong, _)| *strong >= 2 * weak)
                .map(|&(strong, j)| (rows[i].power_w / rows[j].power_w, strong))
                .filter(|(x, _)| *x > 1.0 + rules.monotone && x.is_finite())
                .max_by(|a, b| a.0.total_cmp(&b.0));
            if let Some((x, strong)) = worst {
                suspect(i, x, format!("{x:.3} times the same state at drive {strong}"), true);
            }
        }
    }

    // one value for all states; tables carry as few as four digits
    let mut by_cell: IndexMap<(&str, &str), Vec<usize>> = IndexMap::new();
    for (i, r) in rows.iter().enumerate() {
        by_cell.entry((&r.cell, &r.corner)).or_default().push(i);
    }
    for list in by_cell.values() {
        let first = rows[list[0]].power_w;
        if list.len() > 1 && list.iter().all(|&i| (rows[i].power_w / first - 1.0).abs() < 1e-4) {
            for &i in list {
                suspect(i, 1.0, format!("all {} states of the cell carry one value", list.len()), true);
            }
        }
    }

    if let Some(compared) = compared {
        let index: IndexMap<(&str, &str, &str), usize> = rows
            .iter()
            .enumerate()
            .map(|(i, r)| ((r.cell.as_str(), r.corner.as_str(), r.when.as_str()), i))
            .collect();
        for c in &compared.rows {
            let x = c.ratio();
            if (x > 1.0 + rules.prediction || x < 1.0 / (1.0 + rules.prediction))
                && x > 0.0
                && let Some(&i) = index.get(&(c.cell.as_str(), c.corner.as_str(), c.when.as_str()))
            {
                let side = if x > 1.0 { "above" } else { "below" };
                let factor = if x > 1.0 { x } else { 1.0 / x };
                suspect(i, x, format!("the prediction is {factor:.3} times {side} the table"), false);
            }
        }
    }
    let mut all: Vec<Suspect> = found.into_values().collect();
    all.sort_by(|a, b| b.severity.total_cmp(&a.severity));
    all
}

#[cfg(test)]
mod tests {
    use super::*;

    fn row(cell: &str, corner: &str, when: &str, nw: f64) -> PublishedRow {
        PublishedRow {
            cell: cell.into(),
            corner: corner.into(),
            when: when.into(),
            power_w: nw * 1e-9,
            line: 0,
        }
    }
    fn corner(name: &str, process: &str, temp_c: f64, vdd_v: f64) -> PublishedCorner {
        PublishedCorner { name: name.into(), process: process.into(), temp_c, vdd_v }
    }

    #[test]
    fn each_rule_finds_its_row_and_only_that() {
        let corners = [
            corner("lo", "ff", 25.0, 1.0),
            corner("hi", "ff", 25.0, 1.2),
            corner("hot", "ff", 100.0, 1.2),
            corner("tw", "ss", 25.0, 1.0),
        ];
        let rows = [
            row("a_1", "lo", "A", 3.0), // above the higher supply
            row("a_1", "hi", "A", 1.0),
            row("a_1", "hot", "A", 9.0),
            row("a_1", "lo", "!A", 1.0),
            row("a_1", "tw", "!A", 1.02), // above its twin
            row("b_1", "lo", "A", 5.0),   // above the stronger cell
            row("b_1", "lo", "!A", 4.0),
            row("b_4", "lo", "A", 2.0),
            row("b_4", "lo", "!A", 8.0),
            row("c_1", "hi", "A", 7.0), // all equal
            row("c_1", "hi", "!A", 7.0),
        ];
        let rules =
            SuspectRules { same_cards: vec![vec!["ff".into(), "ss".into()]], ..SuspectRules::default() };
        let found = find_suspects(&rows, &corners, None, &rules);
        let names: Vec<String> =
            found.iter().map(|s| format!("{} {} {}", s.cell, s.corner, s.when)).collect();
        assert_eq!(names, ["a_1 lo A", "b_1 lo A", "a_1 tw !A", "c_1 hi A", "c_1 hi !A"]);
        assert!(found[0].reasons[0].contains("3.000 times hi (a higher supply)"));
    }
}
