//! Times the main job, in process and as a whole process, on one core:
//!
//! ```sh
//! cargo run --release -p shiftwright-tests --bin bench
//! ```
//!
//! Every figure is the median of several runs after a warm-up; ratios are of
//! figures from this one run.

use std::fmt::Write as _;
use std::time::Instant;

use shiftwright::pipeline;
use shiftwright::spec::{Document, NoFiles, Spec};

/// Median time of `work` in milliseconds.
fn median(runs: usize, mut work: impl FnMut()) -> f64 {
    work();
    let mut times: Vec<f64> = (0..runs)
        .map(|_| {
            let start = Instant::now();
            work();
            start.elapsed().as_secs_f64() * 1e3
        })
        .collect();
    times.sort_by(f64::total_cmp);
    times[times.len() / 2]
}

fn spec(text: &str) -> Spec {
    Document::parse("bench.yaml", text.as_bytes(), &NoFiles)
        .and_then(|document| document.resolve(&[]))
        .unwrap_or_else(|error| panic!("{error}\n{text}"))
}

/// `count` layers of 5 nm, barriers and wells in turn.
fn stack(count: usize, tolerance: &str) -> String {
    let mut layers = String::new();
    for k in 0..count {
        let (edge, mass) = if k % 2 == 0 { ("232 meV", 0.0919) } else { ("0 meV", 0.0665) };
        let thickness = 5.0 + 0.1 * (k % 7) as f64;
        let _ = writeln!(layers, "      - {{thickness: {thickness} nm, edge: {edge}, mass: {mass}}}");
    }
    format!(
        "spec: 1\nname: bench\nsummary: bench\nsystems:\n  e:\n    kind: layers\n    charge: -1\n    field: F\n    stack:\n{layers}\
         control: {{symbol: F, unit: kV/cm, within: [-1, 1]}}\n\
         formulas:\n  level:\n    unit: meV\n    sum: [{{system: e, level: 1}}]\n    tolerance: {tolerance}\n"
    )
}

/// A dense complex Hermitian matrix with reproducible entries, and a diagonal
/// slope, as a spec with inline rows.
fn matrix(order: usize) -> String {
    let mut word = 88_172_645_463_325_252_u64;
    let mut draw = || {
        word ^= word << 13;
        word ^= word >> 7;
        word ^= word << 17;
        (word >> 11) as f64 / (1_u64 << 53) as f64 - 0.5
    };
    let mut file = String::from("%%MatrixMarket matrix coordinate complex hermitian\n");
    let _ = writeln!(file, "{order} {order} {}", order * (order + 1) / 2);
    for column in 1..=order {
        for row in column..=order {
            let imaginary = if row == column { 0.0 } else { draw() };
            let _ = writeln!(file, "{row} {column} {:e} {imaginary:e}", draw());
        }
    }
    file
}

struct Matrices(usize);

impl shiftwright::spec::Loader for Matrices {
    fn load(&self, path: &str) -> Result<Vec<u8>, String> {
        if path == "h0.mtx" {
            return Ok(matrix(self.0).into_bytes());
        }
        let mut file = String::from("%%MatrixMarket matrix coordinate real symmetric\n");
        let _ = writeln!(file, "{0} {0} {0}", self.0);
        for row in 1..=self.0 {
            let _ = writeln!(file, "{row} {row} {}", (row % 5) as f64 - 2.0);
        }
        Ok(file.into_bytes())
    }
}

fn main() {
    let well = std::fs::read_to_string(shiftwright_tests::repository().join("specs/shutter.yaml"))
        .unwrap_or_else(|error| panic!("the demo spec: {error}"));
    let shutter = spec(&well);
    let coefficients = median(51, || drop(pipeline::series(&shutter).expect("it solves")));
    let ranged = median(21, || drop(pipeline::solve(&shutter).expect("it solves")));
    println!("three-layer stack, coefficients           {coefficients:9.3} ms");
    println!("three-layer stack, with range             {ranged:9.3} ms");
    let program = shiftwright_tests::program();
    let folder = shiftwright_tests::Scratch::new("bench");
    folder.write("shutter.yaml", &well);
    let whole = median(21, || {
        let status = std::process::Command::new(program)
            .args(["generate", "shutter.yaml"])
            .current_dir(folder.path())
            .stdout(std::process::Stdio::null())
            .status();
        assert!(status.is_ok_and(|status| status.success()));
    });
    println!("three-layer stack, whole process          {whole:9.3} ms");
    let (ten, many) = (spec(&stack(11, "1 meV")), spec(&stack(201, "1 meV")));
    let ten = median(5, || drop(pipeline::series(&ten).expect("it solves")));
    let many = median(3, || drop(pipeline::series(&many).expect("it solves")));
    println!("11 layers, coefficients                   {ten:9.3} ms");
    println!("201 layers, coefficients                  {many:9.3} ms, {:.1} times 11 layers", many / ten);
    for order in [100, 300, 1000] {
        let text = "spec: 1\nname: bench\nsummary: bench\nsystems:\n  m:\n    kind: matrix\n    unit: 1\n    h0: {file: h0.mtx}\n    h1: {file: h1.mtx}\n\
                    control: {symbol: x, unit: 1, within: [-1, 1]}\n\
                    formulas:\n  level:\n    unit: 1\n    sum: [{system: m, level: 1}]\n    tolerance: 1\n";
        let spec = Document::parse("bench.yaml", text.as_bytes(), &Matrices(order))
            .and_then(|document| document.resolve(&[]))
            .unwrap_or_else(|error| panic!("{error}"));
        let time = median(3, || drop(pipeline::series(&spec).expect("it solves")));
        println!("complex matrix of order {order:4}, coefficients {time:9.3} ms");
    }
}
