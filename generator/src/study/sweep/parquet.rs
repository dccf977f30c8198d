//! A table of doubles as a Parquet file: one row group, one plain uncompressed
//! page per column, units as metadata of the file.
//!
//! Source: the Apache Parquet format, version 2.10 (`parquet.thrift`), and the
//! Thrift compact protocol, by which its headers are written. Only what this
//! table needs is here; a general-purpose reader is the judge in the tests.

use super::Column;

/// Writes structures of the Thrift compact protocol.
#[derive(Default)]
struct Thrift {
    bytes: Vec<u8>,
    /// Last field number of each open structure.
    last: Vec<i16>,
}

const I32: u8 = 5;
const I64: u8 = 6;
const BINARY: u8 = 8;
const LIST: u8 = 9;
const STRUCT: u8 = 12;

impl Thrift {
    fn varint(&mut self, mut value: u64) {
        while value >= 0x80 {
            self.bytes.push((value & 0x7f) as u8 | 0x80);
            value >>= 7;
        }
        self.bytes.push(value as u8);
    }

    fn zigzag(&mut self, value: i64) {
        self.varint(((value << 1) ^ (value >> 63)) as u64);
    }

    fn field(&mut self, number: i16, kind: u8) {
        let last = self.last.last_mut();
        let step = number - last.as_deref().copied().unwrap_or(0);
        if let Some(last) = last {
            *last = number;
        }
        // Field numbers here rise by less than 16, so the short form always fits.
        self.bytes.push(((step as u8) << 4) | kind);
    }

    fn open(&mut self) {
        self.last.push(0);
    }

    fn close(&mut self) {
        self.last.pop();
        self.bytes.push(0);
    }

    fn i32(&mut self, number: i16, value: i64) {
        self.field(number, I32);
        self.zigzag(value);
    }

    fn i64(&mut self, number: i16, value: i64) {
        self.field(number, I64);
        self.zigzag(value);
    }

    fn raw(&mut self, text: &str) {
        self.varint(text.len() as u64);
        self.bytes.extend_from_slice(text.as_bytes());
    }

    fn text(&mut self, number: i16, text: &str) {
        self.field(number, BINARY);
        self.raw(text);
    }

    fn list(&mut self, number: i16, kind: u8, length: usize) {
        self.field(number, LIST);
        if length < 15 {
            self.bytes.push(((length as u8) << 4) | kind);
        } else {
            self.bytes.push(0xf0 | kind);
            self.varint(length as u64);
        }
    }

    fn open_field(&mut self, number: i16) {
        self.field(number, STRUCT);
        self.open();
    }
}

/// Physical type DOUBLE.
const DOUBLE: i64 = 5;
/// Encoding PLAIN.
const PLAIN: i64 = 0;
/// Encoding RLE, of definition levels.
const RLE: i64 = 3;

/// Definition levels of a column, run-length encoded with their length in front.
fn levels(values: &[Option<f64>]) -> Vec<u8> {
    let mut runs = Thrift::default();
    let mut idx = 0;
    while idx < values.len() {
        let level = values.get(idx).is_some_and(Option::is_some);
        let length = values.iter().skip(idx).take_while(|v| v.is_some() == level).count();
        runs.varint((length as u64) << 1);
        runs.bytes.push(u8::from(level));
        idx += length;
    }
    let mut out = u32::try_from(runs.bytes.len()).unwrap_or(u32::MAX).to_le_bytes().to_vec();
    out.extend(runs.bytes);
    out
}

/// The file: `table[c][r]` is row r of column c, `None` where there is no number.
#[must_use]
pub fn parquet(columns: &[Column], table: &[Vec<Option<f64>>]) -> Vec<u8> {
    let rows = table.first().map_or(0, Vec::len) as i64;
    let mut out = b"PAR1".to_vec();
    // Offset and length of each column's page, header included.
    let mut chunks: Vec<(i64, i64)> = Vec::new();
    for values in table {
        let mut page = levels(values);
        for value in values.iter().flatten() {
            page.extend(value.to_le_bytes());
        }
        let mut header = Thrift::default();
        header.open();
        header.i32(1, 0); // data page
        header.i32(2, page.len() as i64);
        header.i32(3, page.len() as i64);
        header.open_field(5);
        header.i32(1, values.len() as i64);
        header.i32(2, PLAIN);
        header.i32(3, RLE);
        header.i32(4, RLE);
        header.close();
        header.close();
        chunks.push((out.len() as i64, (header.bytes.len() + page.len()) as i64));
        out.extend(header.bytes);
        out.extend(page);
    }
    let mut footer = Thrift::default();
    footer.open();
    footer.i32(1, 1);
    footer.list(2, STRUCT, columns.len() + 1);
    footer.open();
    footer.text(4, "sweep");
    footer.i32(5, columns.len() as i64);
    footer.close();
    for column in columns {
        footer.open();
        footer.i32(1, DOUBLE);
        footer.i32(3, 1); // optional
        footer.text(4, &column.name);
        footer.close();
    }
    footer.i64(3, rows);
    footer.list(4, STRUCT, 1);
    footer.open();
    footer.list(1, STRUCT, columns.len());
    let mut total = 0;
    for (column, &(offset, length)) in columns.iter().zip(&chunks) {
        total += length;
        footer.open();
        footer.i64(2, offset);
        footer.open_field(3);
        footer.i32(1, DOUBLE);
        footer.list(2, I32, 2);
        footer.zigzag(PLAIN);
        footer.zigzag(RLE);
        footer.list(3, BINARY, 1);
        footer.raw(&column.name);
        footer.i32(4, 0); // uncompressed
        footer.i64(5, rows);
        footer.i64(6, length);
        footer.i64(7, length);
        // The unit is the column's own metadata.
        footer.list(8, STRUCT, 1);
        footer.open();
        footer.text(1, "unit");
        footer.text(2, &column.unit);
        footer.close();
        footer.i64(9, offset);
        footer.close();
        footer.close();
    }
    footer.i64(2, total);
    footer.i64(3, rows);
    footer.close();
    footer.list(5, STRUCT, columns.len());
    for column in columns {
        footer.open();
        footer.text(1, &format!("unit:{}", column.name));
        footer.text(2, &column.unit);
        footer.close();
    }
    footer.text(6, "shiftwright");
    footer.close();
    let length = u32::try_from(footer.bytes.len()).unwrap_or(u32::MAX);
    out.extend(footer.bytes);
    out.extend(length.to_le_bytes());
    out.extend(b"PAR1");
    out
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_file_has_its_marks_and_its_footer_length() {
        let columns = vec![
            Column { name: "well".to_owned(), unit: "nm".to_owned() },
            Column { name: "onset.c2".to_owned(), unit: "meV/(kV/cm)^2".to_owned() },
        ];
        let table = vec![vec![Some(8.0), Some(9.0), Some(10.0)], vec![Some(-1e-3), Some(-2e-3), None]];
        let bytes = parquet(&columns, &table);
        assert_eq!(&bytes[..4], b"PAR1");
        assert_eq!(&bytes[bytes.len() - 4..], b"PAR1");
        let at = bytes.len() - 8;
        let footer = u32::from_le_bytes(bytes[at..at + 4].try_into().expect("four")) as usize;
        assert!(footer > 100 && footer < at);
        // The doubles stand unchanged in the file.
        assert!(bytes.windows(8).any(|window| window == (-2e-3_f64).to_le_bytes()));
        if let Some(folder) = std::env::var_os("SHIFTWRIGHT_KEEP_PAGE") {
            std::fs::write(std::path::Path::new(&folder).join("t.parquet"), &bytes).expect("writes");
        }
    }
}
