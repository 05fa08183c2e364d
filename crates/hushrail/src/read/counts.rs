//! How many instances of each master: the record both netlist readers end in, and its plain table form.
//!
//! The table is a CSV file with the header `cell,count`, the columns in either order. It is strict: a column,
//! a number or a cell it does not understand is an error with its place, never a row left out.

use indexmap::IndexMap;
use serde::{Deserialize, Serialize};

use super::source::{Place, ReadError, Source, nearest};

/// How many instances of each master, in first-seen order.
///
/// # Example
/// ```
/// use hushrail::read::counts::InstanceCounts;
/// let mut block = InstanceCounts::default();
/// block.add("inv_1", 3);
/// block.add("nand2_1", 2);
/// block.add("inv_1", 1);
/// assert_eq!(block.counts["inv_1"], 4);
/// assert_eq!(block.total(), 6);
/// ```
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, Default)]
pub struct InstanceCounts {
    /// The module the count starts from; empty for a count table.
    pub top: String,
    /// Instances by master name.
    pub counts: IndexMap<String, u64>,
}

impl InstanceCounts {
    /// All instances of all masters; stops at `u64::MAX`, which no count read from a file passes.
    pub fn total(&self) -> u64 {
        self.counts.values().fold(0, |sum, &n| sum.saturating_add(n))
    }

    /// Adds `n` instances of `cell`; stops at `u64::MAX`.
    pub fn add(&mut self, cell: &str, n: u64) {
        if let Some(count) = self.counts.get_mut(cell) {
            *count = count.saturating_add(n);
        } else {
            self.counts.insert(cell.to_owned(), n);
        }
    }
}

const COLUMNS: [&str; 2] = ["cell", "count"];

/// Reads instance counts from a table with the header `cell,count`.
///
/// Fields may be quoted, and blanks around them do not count where there are no quotes. A count of 0 is kept as a row.
///
/// # Errors
/// The header is missing, lacks a column or has one that is unknown or doubled; a row has too few or too many
/// fields; a cell has no name or stands twice; a count is not a whole number from 0 up; the counts add up to
/// more than `u64::MAX`; there are no rows.
///
/// # Example
/// ```
/// use hushrail::read::{Source, counts::read_counts_csv};
/// let block = read_counts_csv(&Source::from_text("block.csv", "cell,count\ninv_1,120\nnand2_1,40\n"))?;
/// assert_eq!(block.total(), 160);
/// # Ok::<(), hushrail::read::ReadError>(())
/// ```
pub fn read_counts_csv(source: &Source) -> Result<InstanceCounts, ReadError> {
    let text = source.text.strip_prefix('\u{feff}').unwrap_or(&source.text);
    let table = Table { source, text, skipped: source.text.len() - text.len() };
    let mut reader = csv::ReaderBuilder::new()
        .has_headers(false)
        .flexible(true)
        .trim(csv::Trim::All)
        .from_reader(text.as_bytes());
    let mut record = csv::StringRecord::new();
    if text.trim().is_empty() || !table.advance(&mut reader, &mut record)? {
        return Err(source.nothing("instance counts"));
    }
    let (cell_column, count_column) = table.header(&record)?;

    let mut out = InstanceCounts::default();
    let mut places: Vec<usize> = Vec::new();
    let mut total = 0u64;
    while table.advance(&mut reader, &mut record)? {
        if record.len() != COLUMNS.len() {
            let column = record.len().min(COLUMNS.len()).saturating_sub(1);
            let found = match record.len() {
                1 => "this row has 1 field".to_owned(),
                n => format!("this row has {n} fields"),
            };
            return Err(table.syntax(&record, column, found, "a row is one cell name and one count"));
        }
        let cell = record.get(cell_column).unwrap_or_default();
        if cell.is_empty() {
            return Err(table.syntax(&record, cell_column, "the cell has no name", "write its master name"));
        }
        if cell.contains(['\n', '\r']) {
            let found = "the cell name runs over the end of the line";
            return Err(table.syntax(
                &record,
                cell_column,
                found,
                "close the quote on the line that opens it",
            ));
        }
        if cell.contains('"') {
            let found = format!("the cell name is `{cell}`");
            return Err(table.syntax(
                &record,
                cell_column,
                found,
                "want a quote at both ends of a field or none",
            ));
        }
        let count = table.count(&record, count_column)?;
        total = total.checked_add(count).ok_or_else(|| ReadError::Range {
            at: table.place(&record, count_column),
            name: "sum of counts".into(),
            value: format!("more than {}", u64::MAX),
            wanted: "want at most that many instances".into(),
        })?;
        if let (first, Some(_)) = out.counts.insert_full(cell.to_owned(), count) {
            let first = Place::of_offset(&source.path, &source.text, places[first]);
            let found = format!("cell `{cell}` stands twice, first at {first}");
            return Err(table.syntax(
                &record,
                cell_column,
                found,
                "want one row per cell; add the counts up",
            ));
        }
        places.push(table.offset(&record, cell_column));
    }
    if out.counts.is_empty() { Err(source.nothing("instance counts")) } else { Ok(out) }
}

/// The text of a table and where its fields are.
struct Table<'s> {
    source: &'s Source,
    /// The text after a byte order mark.
    text: &'s str,
    /// Bytes of the byte order mark.
    skipped: usize,
}

impl Table<'_> {
    fn advance(
        &self,
        reader: &mut csv::Reader<&[u8]>,
        record: &mut csv::StringRecord,
    ) -> Result<bool, ReadError> {
        reader.read_record(record).map_err(|e| ReadError::Syntax {
            at: Place::new(&self.source.path, 1, 1),
            found: e.to_string(),
            wanted: "want a table of comma-separated values".into(),
        })
    }

    /// Which columns hold the cell and the count.
    fn header(&self, record: &csv::StringRecord) -> Result<(usize, usize), ReadError> {
        let wanted = "want the header `cell,count`, separated by a comma";
        if !record.iter().any(|name| COLUMNS.contains(&name)) {
            let row: Vec<&str> = record.iter().collect();
            return Err(self.syntax(record, 0, format!("the first row is `{}`", row.join(",")), wanted));
        }
        let mut columns = [None; 2];
        for (column, name) in record.iter().enumerate() {
            let Some(known) = COLUMNS.iter().position(|&c| c == name) else {
                return Err(ReadError::Unknown {
                    at: self.place(record, column),
                    kind: "column",
                    name: name.to_owned(),
                    nearest: nearest(name, COLUMNS),
                });
            };
            if columns[known].replace(column).is_some() {
                return Err(self.syntax(record, column, format!("column `{name}` stands twice"), wanted));
            }
        }
        match columns {
            [Some(cell), Some(count)] => Ok((cell, count)),
            [None, _] => Err(self.syntax(record, 0, "column `cell` is missing", wanted)),
            [_, None] => Err(self.syntax(record, 0, "column `count` is missing", wanted)),
        }
    }

    fn count(&self, record: &csv::StringRecord, column: usize) -> Result<u64, ReadError> {
        let field = record.get(column).unwrap_or_default();
        let digits = field.strip_prefix(['+', '-']).unwrap_or(field);
        if digits.is_empty() || !digits.bytes().all(|b| b.is_ascii_digit()) {
            let found = format!("the count is `{field}`");
            return Err(self.syntax(record, column, found, "want a whole number from 0 up"));
        }
        let range = |wanted: String| ReadError::Range {
            at: self.place(record, column),
            name: "count".into(),
            value: field.to_owned(),
            wanted,
        };
        if field.starts_with('-') {
            return Err(range("want a whole number from 0 up".into()));
        }
        digits.parse().map_err(|_| range(format!("want at most {}", u64::MAX)))
    }

    fn syntax(
        &self,
        record: &csv::StringRecord,
        column: usize,
        found: impl Into<String>,
        wanted: impl Into<String>,
    ) -> ReadError {
        ReadError::Syntax { at: self.place(record, column), found: found.into(), wanted: wanted.into() }
    }

    fn place(&self, record: &csv::StringRecord, column: usize) -> Place {
        Place::of_offset(&self.source.path, &self.source.text, self.offset(record, column))
    }

    /// Where a field begins in the source text, for the reader keeps places of records only.
    fn offset(&self, record: &csv::StringRecord, column: usize) -> usize {
        let bytes = self.text.as_bytes();
        let start = record.position().map_or(0, |p| usize::try_from(p.byte()).unwrap_or(usize::MAX));
        let mut i = start.min(bytes.len());
        while matches!(bytes.get(i), Some(b'\n' | b'\r')) {
            i += 1;
        }
        for _ in 0..column {
            i = field_end(bytes, i) + 1;
        }
        while matches!(bytes.get(i), Some(b' ' | b'\t')) {
            i += 1;
        }
        i + self.skipped
    }
}

/// Where the field that begins at `i` ends; a quote counts at its start only, as for the reader.
fn field_end(bytes: &[u8], mut i: usize) -> usize {
    let mut quoted = bytes.get(i) == Some(&b'"');
    i += usize::from(quoted);
    while let Some(&b) = bytes.get(i) {
        match b {
            b'"' if quoted && bytes.get(i + 1) == Some(&b'"') => i += 1,
            b'"' => quoted = false,
            b',' | b'\n' | b'\r' if !quoted => break,
            _ => {}
        }
        i += 1;
    }
    i
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn read(text: &str) -> Result<InstanceCounts, ReadError> {
        read_counts_csv(&Source::from_text("c.csv", text))
    }

    fn message(text: &str) -> String {
        read(text).unwrap_err().to_string()
    }

    #[test]
    fn rows_keep_their_order() {
        let c = read("cell,count\nz_1,3\na_1,2\nm_1,0\n").unwrap();
        assert_eq!(c.top, "");
        let rows: Vec<_> = c.counts.iter().map(|(k, &n)| (k.as_str(), n)).collect();
        assert_eq!(rows, [("z_1", 3), ("a_1", 2), ("m_1", 0)]);
        assert_eq!(c.total(), 5);
    }

    #[test]
    fn columns_come_in_any_order() {
        assert_eq!(read("count,cell\n3,z_1\n").unwrap(), read("cell,count\nz_1,3\n").unwrap());
    }

    #[test]
    fn quotes_blanks_line_ends_and_a_byte_order_mark_do_not_matter() {
        let plain = read("cell,count\nz_1,3\ny_1,4\n").unwrap();
        assert_eq!(read("\u{feff}cell , count\r\n\r\n\"z_1\",3\r\n  y_1, 4").unwrap(), plain);
        assert_eq!(read("\"cell\",\"count\"\n\"z_1\",\"3\"\n\"y_1\",+4\n").unwrap(), plain);
    }

    #[test]
    fn add_sums_and_stops_at_the_largest_number() {
        let mut c = InstanceCounts::default();
        c.add("a", u64::MAX - 1);
        c.add("b", 1);
        c.add("a", 5);
        assert_eq!(c.counts["a"], u64::MAX);
        assert_eq!(c.total(), u64::MAX);
    }

    #[test]
    fn a_bad_number_is_shown_with_its_place() {
        for (field, column) in [("x", 5), ("1.5", 5), ("1e3", 5), ("", 5), ("-", 5), ("0x1f", 5), ("1 2", 5)]
        {
            let text = format!("cell,count\n\nz_1,3\nabc,{field}\n");
            assert_eq!(
                message(&text),
                format!("c.csv:4:{column}: the count is `{field}`; want a whole number from 0 up")
            );
        }
    }

    #[test]
    fn negative_and_huge_counts_are_out_of_range() {
        assert_eq!(
            message("count,cell\n -3,z_1\n"),
            "c.csv:2:2: `count` is -3; want a whole number from 0 up"
        );
        assert_eq!(
            message("cell,count\nz_1,18446744073709551616\n"),
            "c.csv:2:5: `count` is 18446744073709551616; want at most 18446744073709551615"
        );
        assert_eq!(
            message("cell,count\nz_1,18446744073709551615\ny_1,1\n"),
            "c.csv:3:5: `sum of counts` is more than 18446744073709551615; want at most that many instances"
        );
    }

    #[test]
    fn a_doubled_cell_names_both_places() {
        assert_eq!(
            message("cell,count\nz_1,1\ny_1,1\n  z_1,2\n"),
            "c.csv:4:3: cell `z_1` stands twice, first at c.csv:2:1; want one row per cell; add the counts up"
        );
        assert_eq!(
            message("\u{feff}count,cell\n1,z_1\n2,z_1\n"),
            "c.csv:3:3: cell `z_1` stands twice, first at c.csv:2:3; want one row per cell; add the counts up"
        );
    }

    #[test]
    fn the_header_must_be_there_and_be_right() {
        let wanted = "want the header `cell,count`, separated by a comma";
        assert_eq!(message("z_1,3\ny_1,4\n"), format!("c.csv:1:1: the first row is `z_1,3`; {wanted}"));
        assert_eq!(
            message("cell;count\nz_1;3\n"),
            format!("c.csv:1:1: the first row is `cell;count`; {wanted}")
        );
        assert_eq!(message("cell\nz_1\n"), format!("c.csv:1:1: column `count` is missing; {wanted}"));
        assert_eq!(message("count\n3\n"), format!("c.csv:1:1: column `cell` is missing; {wanted}"));
        assert_eq!(
            message("cell,count,cell\nz_1,3,y_1\n"),
            format!("c.csv:1:12: column `cell` stands twice; {wanted}")
        );
        assert_eq!(
            message("cell,counts\nz_1,3\n"),
            "c.csv:1:6: column `counts` is not defined; did you mean `count`?"
        );
        assert_eq!(message("cell,count,area\nz_1,3,1\n"), "c.csv:1:12: column `area` is not defined");
    }

    #[test]
    fn a_row_has_two_fields_and_a_name() {
        let wanted = "a row is one cell name and one count";
        assert_eq!(message("cell,count\nz_1\n"), format!("c.csv:2:1: this row has 1 field; {wanted}"));
        assert_eq!(
            message("cell,count\nz_1,\"3\",4\n"),
            format!("c.csv:2:5: this row has 3 fields; {wanted}")
        );
        assert_eq!(
            message("cell,count\n \"z_1\",x\n"),
            "c.csv:2:2: the cell name is `\"z_1\"`; want a quote at both ends of a field or none"
        );
        assert_eq!(
            message("cell,count\n\"z,\"\"_1\"\"\",4\n"),
            "c.csv:2:1: the cell name is `z,\"_1\"`; want a quote at both ends of a field or none"
        );
        assert_eq!(
            message("cell,count\n\"z,,1\",x\n"),
            "c.csv:2:8: the count is `x`; want a whole number from 0 up"
        );
        assert_eq!(
            message("cell,count\n\"a\"\",b\",3,4\n"),
            format!("c.csv:2:9: this row has 3 fields; {wanted}")
        );
        assert_eq!(message("cell,count\n,4\n"), "c.csv:2:1: the cell has no name; write its master name");
    }

    #[test]
    fn an_open_quote_does_not_swallow_rows() {
        assert_eq!(
            message("cell,count\n3,4\n\"z_1,3\ny_1,4\n"),
            "c.csv:3:1: this row has 1 field; a row is one cell name and one count"
        );
        assert_eq!(
            message("count,cell\n3,\"z_1\n4,y_1\n"),
            "c.csv:2:3: the cell name runs over the end of the line; close the quote on the line that opens it"
        );
    }

    #[test]
    fn columns_count_characters() {
        assert_eq!(
            message("cell,count\nµé,x\n"),
            "c.csv:2:4: the count is `x`; want a whole number from 0 up"
        );
    }

    #[test]
    fn a_file_without_rows_holds_nothing() {
        assert_eq!(message(""), "c.csv: no instance counts found (the file is empty)");
        assert_eq!(message("\u{feff} \n\n"), "c.csv: no instance counts found");
        assert_eq!(message("cell,count\n"), "c.csv: no instance counts found");
    }

    proptest! {
        #[test]
        fn any_bytes_give_a_value_or_an_error(bytes in proptest::collection::vec(any::<u8>(), 0..200)) {
            let text = String::from_utf8_lossy(&bytes);
            let _ = read(&text);
            let _ = read(&format!("cell,count\n{text}"));
        }

        #[test]
        fn what_is_written_is_read(rows in proptest::collection::btree_map("[a-z][a-z0-9_]{0,8}", 0u64..1 << 40, 1..20)) {
            let lines: Vec<String> = rows.iter().map(|(cell, n)| format!("{cell},{n}\n")).collect();
            let text = format!("cell,count\n{}", lines.concat());
            let c = read(&text).unwrap();
            prop_assert_eq!(c.total(), rows.values().sum::<u64>());
            prop_assert!(rows.iter().all(|(cell, n)| c.counts[cell.as_str()] == *n));
        }
    }
}
