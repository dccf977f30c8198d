//! `sweep`: many runs, one row each, with progress, interruption and resumption.
//!
//! Rows are appended in order to a table of text: the CSV file itself, or a
//! journal beside the Parquet file, from which that file is made at the end.

use std::fs::{self, File, OpenOptions};
use std::io::{BufRead, BufReader, IsTerminal, Write};
use std::ops::Range;
use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};

use indicatif::{ProgressBar, ProgressDrawTarget, ProgressStyle};

use crate::diagnostic::{Diagnostic, Error, Result};
use crate::study::sweep::{Column, Plan, Row, Template, Vary, columns, header, holds, parquet, rows};

use super::arguments::SweepArguments;
use super::files::refused;
use super::{Ended, files, load, message, print};

/// Rows between two writes: enough for all cores, few enough to lose little.
const CHUNK: u64 = 256;

/// Runs a sweep.
pub fn sweep(arguments: &SweepArguments) -> Ended {
    let vary = arguments.vary.iter().map(|text| Vary::parse(text)).collect::<Result<Vec<_>>>()?;
    let plan = Plan::new(vary, arguments.draws, arguments.seed)?;
    let range = slice(&plan, arguments.slice.as_deref())?;
    let as_parquet = match arguments.out.extension().and_then(|ending| ending.to_str()) {
        Some("csv") => false,
        Some("parquet") => true,
        _ => {
            return Err(Error::spec(
                Diagnostic::new("ending", "the ending of the output file chooses its format")
                    .found(arguments.out.display().to_string())
                    .expected("a name that ends in .csv or .parquet"),
            ));
        }
    };
    let path = arguments.spec.as_path();
    let bytes = load::text_of(path)?;
    let loaded = load::read(path, &bytes)?;
    let names: Vec<&str> = plan.vary.iter().map(|one| one.name.as_str()).collect();
    let template = Template::new(&loaded.text, &names)?;
    let columns = columns(&plan, &load::solve(&loaded.spec)?);
    let run = |text: &str| load::solve(&load::read(path, text.as_bytes())?.spec);
    let table_path = if as_parquet { journal(&arguments.out) } else { arguments.out.clone() };
    let mut table = Table::open(&table_path, &plan, &columns, range.clone())?;
    if let Some(last) = table.last.clone() {
        // The spec may have changed since: the last row is computed again.
        let row = table.next - 1;
        let again = rows(&plan, &template, &columns, row..row + 1, &run);
        if again.first().map(|row| row.line(columns.len())) != Some(last) {
            return Err(other_sweep(&table_path));
        }
    }
    let stop = Arc::new(AtomicBool::new(false));
    let flag = stop.clone();
    // A second handler is refused only if one is set already; then Ctrl-C ends the run at once.
    let _ = ctrlc::set_handler(move || flag.store(true, Ordering::SeqCst));
    let bar = bar(range.end - range.start);
    bar.set_position(table.next - range.start);
    while table.next < range.end && !stop.load(Ordering::SeqCst) {
        let chunk = table.next..(table.next + CHUNK).min(range.end);
        let finished: Vec<Row> = rows(&plan, &template, &columns, chunk, &run);
        table.append(&finished, columns.len())?;
        bar.set_position(table.next - range.start);
    }
    bar.finish_and_clear();
    let (done, wanted) = (table.next - range.start, range.end - range.start);
    drop(table);
    let list = numbers(&table_path, columns.len())?;
    if as_parquet {
        files::write_one(&arguments.out, &parquet(&columns, &list))?;
        if done == wanted {
            fs::remove_file(&table_path).map_err(|e| refused("cannot be removed", &table_path, &e))?;
        }
    }
    if done < wanted {
        message::print(&format!(
            "shiftwright: stopped after {done} of {wanted} rows; the same call goes on from there\n"
        ));
        return Ok(4);
    }
    let within = loaded.spec.control.within;
    let whole = (0..list.first().map_or(0, Vec::len))
        .filter(|&row| {
            let cells: Vec<Option<f64>> =
                list.iter().map(|column| column.get(row).copied().flatten()).collect();
            holds(&columns, &cells, within)
        })
        .count();
    print::people(&format!(
        "{wanted} rows in {}; {} hold the whole wanted range ({:.2} %)\n",
        arguments.out.display(),
        whole,
        100.0 * whole as f64 / wanted.max(1) as f64
    ))
}

/// Rows of `--slice K/N`, `--slice auto/N` or `--slice auto`.
fn slice(plan: &Plan, text: Option<&str>) -> Result<Range<u64>> {
    let Some(text) = text else { return Ok(0..plan.rows) };
    let wrong = || {
        Error::spec(
            Diagnostic::new("slice", "this is no slice")
                .found(format!("`--slice {text}`"))
                .expected("K/N with K from 1 to N; `auto/N` or `auto` in a job array")
                .action("for example `--slice 3/8`"),
        )
    };
    let (k, n) = text.split_once('/').unwrap_or((text, ""));
    let number = |name: &str| std::env::var(name).ok().and_then(|v| v.trim().parse::<u64>().ok());
    let (k, counted) = if k == "auto" {
        // Array jobs count from a smallest index; indexed jobs from 0.
        match (number("SLURM_ARRAY_TASK_ID"), number("JOB_COMPLETION_INDEX")) {
            (Some(id), _) => {
                let least = number("SLURM_ARRAY_TASK_MIN").unwrap_or(1);
                (id.checked_sub(least).map(|k| k + 1), number("SLURM_ARRAY_TASK_COUNT"))
            }
            (None, Some(index)) => (index.checked_add(1), None),
            (None, None) => (None, None),
        }
    } else {
        (k.parse().ok(), None)
    };
    let n = if n.is_empty() { counted } else { n.parse().ok() };
    match (k, n) {
        (Some(k), Some(n)) if k >= 1 && k <= n => Ok(plan.slice(k, n)),
        _ => Err(wrong()),
    }
}

/// The numbers of a finished table, by column.
fn numbers(path: &Path, columns: usize) -> Result<Vec<Vec<Option<f64>>>> {
    let refuse = |e: std::io::Error| refused("cannot be read back", path, &e);
    let reader = BufReader::new(File::open(path).map_err(refuse)?);
    let mut table = vec![Vec::new(); columns];
    for line in reader.lines().skip(1) {
        let line = line.map_err(refuse)?;
        for (column, cell) in table.iter_mut().zip(line.split(',')) {
            column.push(cell.parse().ok());
        }
    }
    Ok(table)
}

fn journal(out: &Path) -> PathBuf {
    let mut name = out.file_name().unwrap_or_default().to_os_string();
    name.push(".rows.csv");
    out.with_file_name(name)
}

fn other_sweep(path: &Path) -> Error {
    Error::spec(
        Diagnostic::new("other-sweep", format!("{} holds rows of another sweep", path.display()))
            .action("give another output file, or remove this one to begin anew"),
    )
}

fn bar(rows: u64) -> ProgressBar {
    if !std::io::stderr().is_terminal() {
        return ProgressBar::with_draw_target(Some(rows), ProgressDrawTarget::hidden());
    }
    let style = ProgressStyle::with_template("{bar:30} {pos}/{len} rows, {per_sec}, {eta} left");
    ProgressBar::new(rows).with_style(style.unwrap_or_else(|_| ProgressStyle::default_bar()))
}

/// The table on disk, its rows written in order.
struct Table {
    file: File,
    path: PathBuf,
    /// Next row of the plan.
    next: u64,
    /// Last row that is there, as text.
    last: Option<String>,
}

impl Table {
    /// Opens a table, makes it, or cuts off a row that was not finished.
    fn open(path: &Path, plan: &Plan, columns: &[Column], range: Range<u64>) -> Result<Self> {
        let head = header(columns);
        let refuse = |e: std::io::Error| refused("cannot be used as a table", path, &e);
        let mut file = OpenOptions::new()
            .read(true)
            .write(true)
            .create(true)
            .truncate(false)
            .open(path)
            .map_err(refuse)?;
        let mut keep = 0_u64;
        let mut next = range.start;
        let mut last = None;
        let mut reader = BufReader::new(&file);
        let mut line = Vec::new();
        let mut first = true;
        loop {
            line.clear();
            let length = reader.read_until(b'\n', &mut line).map_err(refuse)?;
            if length == 0 || line.last() != Some(&b'\n') {
                // The header is whole or the file is somebody else's.
                if first && !head.as_bytes().starts_with(&line) {
                    return Err(other_sweep(path));
                }
                break;
            }
            let text = String::from_utf8_lossy(&line);
            let text = text.trim_end_matches('\n');
            if first {
                if text != head {
                    return Err(other_sweep(path));
                }
                first = false;
            } else {
                let values: Vec<String> = plan.values(next).iter().map(|v| format!("{v:?}")).collect();
                if next >= range.end || !text.starts_with(&(values.join(",") + ",")) {
                    return Err(other_sweep(path));
                }
                next += 1;
                last = Some(text.to_owned());
            }
            keep += length as u64;
        }
        file.set_len(keep).map_err(refuse)?;
        std::io::Seek::seek(&mut file, std::io::SeekFrom::End(0)).map_err(refuse)?;
        if first {
            file.write_all(format!("{head}\n").as_bytes()).map_err(refuse)?;
        }
        Ok(Self { file, path: path.to_owned(), next, last })
    }

    fn append(&mut self, rows: &[Row], columns: usize) -> Result<()> {
        let mut text = String::new();
        for row in rows {
            text.push_str(&row.line(columns));
            text.push('\n');
        }
        self.file
            .write_all(text.as_bytes())
            .and_then(|()| self.file.flush())
            .map_err(|e| refused("cannot be written", &self.path, &e))?;
        self.next += rows.len() as u64;
        Ok(())
    }
}
