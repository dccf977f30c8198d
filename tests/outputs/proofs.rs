//! What holds for every input: no panic path, and every single in the range.

use shiftwright::diagnostic::Place;
use shiftwright::emit::{self, Target};
use shiftwright::formula::{Formula, NumberFormat};
use shiftwright::outcome::ValueKind;
use shiftwright::spec::Count;
use shiftwright_tests::{Scratch, tool};

use crate::{host, samples};

/// Undefined symbols of a compiled probe crate, and how many probes it holds.
fn undefined(scratch: &Scratch, probe: &str) -> (String, usize) {
    scratch.write("probe.rs", probe);
    let arguments = [
        "--edition",
        "2021",
        "--crate-type",
        "lib",
        "--emit",
        "obj",
        "-C",
        "opt-level=s",
        "-C",
        "panic=abort",
        "-C",
        "codegen-units=1",
        "probe.rs",
        "-o",
        "probe.o",
    ];
    tool(scratch.path(), "rustc", &arguments);
    let list = |flag: &str| {
        String::from_utf8(tool(scratch.path(), "nm", &[flag, "-C", "probe.o"]).stdout).expect("text")
    };
    (list("-u"), list("--defined-only").lines().filter(|l| l.contains(" T probe_")).count())
}

#[test]
fn no_function_of_a_rust_file_can_panic() {
    let place = Place { file: "shapes.yaml".to_owned(), start: 0, end: 1 };
    let count = |bits, step| Count { bits, step, place: place.clone() };
    let counts = NumberFormat::Fixed { control: count(16, 0.01), value: count(32, 1e-3) };
    let outcome = samples::outcome("shapes", "F", 12.3, samples::every_shape(12.3));
    for (format, x, y) in
        [(NumberFormat::F64, "f64", "f64"), (NumberFormat::F32, "f32", "f32"), (counts, "i16", "i32")]
    {
        let stem = format!("shapes_{}", format.word());
        let scratch = Scratch::new(&format!("panic-{}", format.word()));
        let formulas = samples::in_format(&outcome, &format);
        for source in emit::files(&outcome, Target::Rust, &stem, &formulas).expect("a file is printed") {
            scratch.write(&source.file, &source.text);
        }
        let mut probe = format!("#![no_std]\nmod {stem};\n");
        let slope = if x == "i16" { "i64" } else { y };
        let mut probes = 0;
        for formula in &formulas {
            let f = &formula.measured.name;
            probe.push_str(&format!(
                "#[no_mangle] pub extern \"C\" fn probe_{f}_a(x: {x}) -> {y} {{ {stem}::{f}::value(x) }}\n\
                 #[no_mangle] pub extern \"C\" fn probe_{f}_b(x: {x}) -> {slope} {{ {stem}::{f}::slope(x) }}\n\
                 #[no_mangle] pub extern \"C\" fn probe_{f}_c(x: {x}, y: &mut {y}) -> bool {{ match {stem}::{f}::checked(x) {{ Ok(v) => {{ *y = v; true }} Err(_) => false }} }}\n\
                 #[no_mangle] pub extern \"C\" fn probe_{f}_d(y: {y}, x: &mut {x}) -> bool {{ match {stem}::{f}::inverse(y) {{ Ok(v) => {{ *x = v; true }} Err(_) => false }} }}\n\
                 #[no_mangle] pub fn probe_{f}_e(x: &[{x}], y: &mut [{y}]) {{ {stem}::{f}::many(x, y) }}\n"
            ));
            probes += 5;
        }
        let (undefined, found) = undefined(&scratch, &probe);
        assert_eq!(undefined.trim(), "", "{stem}");
        assert_eq!(found, probes, "{stem}");
    }
}

/// The check above would see a panic: indexing leaves one behind.
#[test]
fn the_panic_check_sees_a_panic() {
    let scratch = Scratch::new("panic-control");
    let (undefined, found) = undefined(
        &scratch,
        "#![no_std]\n#[no_mangle] pub extern \"C\" fn probe_a(x: &[i32; 4], i: usize) -> i32 { x[i] }\n",
    );
    assert!(undefined.contains("panic"), "{undefined}");
    assert_eq!(found, 1);
}

/// All 2^32 singles in ascending order, infinities and NaN included: values
/// against double precision, whose own rounding is nine digits further down,
/// and statuses. Prints singles in the range, faults, a checksum of all values
/// and the worst error.
const EVERY_SINGLE_RUST: &str = "mod all_f32;
use all_f32::{onset::*, OutOfRange};
fn exact(x: f32) -> f64 { let d = f64::from(x); 34.93408104531 + d * (-0.0123456789012 + d * -0.0005459111401161) }
fn main() {
    let (mut worst, mut low, mut count, mut bad, mut sum) = (0.0_f64, f32::INFINITY, 0_u64, 0_u64, 0_u64);
    let mut visit = |x: f32| {
        if x >= FROM && x <= TO {
            let y = value(x);
            count += 1;
            sum = (sum ^ u64::from(y.to_bits())).wrapping_mul(0x9e37_79b9_7f4a_7c15);
            worst = worst.max((f64::from(y) - exact(x)).abs());
            if checked(x) != Ok(y) { bad += 1; }
            if x >= CUT_1 { if y > low + 2.0 * ROUNDING { bad += 1; } if y < low { low = y; } }
        } else {
            let status = if x < FROM { OutOfRange::Below } else if x > TO { OutOfRange::Above } else { OutOfRange::NotANumber };
            if checked(x) != Err(status) { bad += 1; }
        }
    };
    for bits in (0x8000_0000..=u32::MAX).rev() { visit(f32::from_bits(bits)); }
    for bits in 0..0x8000_0000 { visit(f32::from_bits(bits)); }
    println!(\"{count} {bad} {sum:x} {worst:.17e}\");
}
";

/// The same in C.
const EVERY_SINGLE_C: &str = "#include \"all_f32.h\"
#include <inttypes.h>
#include <math.h>
#include <stdio.h>
#include <string.h>
static double worst; static float low = INFINITY; static uint64_t count, bad, sum;
static double exact(float x) { double d = (double)x; return 34.93408104531 + d * (-0.0123456789012 + d * -0.0005459111401161); }
static void visit(uint32_t bits)
{
    float x, y, z = 0.0f; uint32_t w; double error; all_f32_status status;
    memcpy(&x, &bits, sizeof x);
    status = all_f32_onset_checked(x, &z);
    if (x >= ALL_F32_ONSET_FROM && x <= ALL_F32_ONSET_TO) {
        y = all_f32_onset(x);
        memcpy(&w, &y, sizeof w);
        count++;
        sum = (sum ^ w) * UINT64_C(0x9e3779b97f4a7c15);
        error = fabs((double)y - exact(x));
        if (error > worst) worst = error;
        if (status != ALL_F32_OK || z != y) bad++;
        if (x >= ALL_F32_ONSET_CUT_1) { if (y > low + 2.0f * ALL_F32_ONSET_ROUNDING) bad++; if (y < low) low = y; }
    } else if (status != (x < ALL_F32_ONSET_FROM ? ALL_F32_BELOW : x > ALL_F32_ONSET_TO ? ALL_F32_ABOVE : ALL_F32_NOT_A_NUMBER) || z != 0.0f) bad++;
}
int main(void)
{
    uint32_t bits;
    for (bits = UINT32_MAX; bits >= 0x80000000u; bits--) visit(bits);
    for (bits = 0; bits < 0x80000000u; bits++) visit(bits);
    printf(\"%\" PRIu64 \" %\" PRIu64 \" %\" PRIx64 \" %.17e\\n\", count, bad, sum, worst);
    return 0;
}
";

#[test]
fn every_single_in_the_range_is_within_the_bound_and_the_branch_is_monotonic() {
    let outcome = samples::outcome("all", "F", 0.0, vec![samples::every_shape(0.0).remove(1)]);
    let formulas = samples::in_format(&outcome, &NumberFormat::F32);
    let scratch = Scratch::new("every-single");
    for target in [Target::Rust, Target::C] {
        for source in emit::files(&outcome, target, "all_f32", &formulas).expect("files are printed") {
            scratch.write(&source.file, &source.text);
        }
    }
    scratch.write("main.rs", EVERY_SINGLE_RUST);
    scratch.write("main.c", EVERY_SINGLE_C);
    let path = scratch.path();
    host::rust(path, &["-C", "opt-level=3"], "from_rust");
    // One unit, so that the compiler may inline: the bits must not depend on it.
    let together = ["-std=c99", "-O3", "main.c", "all_f32.c", "-flto", "-lm", "-o", "from_c"];
    tool(path, "gcc", &together);
    let lines = std::thread::scope(|scope| {
        let running = ["from_rust", "from_c"].map(|program| scope.spawn(|| host::feed(path, program, "")));
        running.map(|thread| thread.join().expect("the program ends well"))
    });
    let words = lines.each_ref().map(|line| line.split_whitespace().collect::<Vec<&str>>());
    let worst: f64 = words[0][3].parse().expect("a number");
    println!("{} singles, worst {worst:e}, bound {:e}", words[0][0], formulas[0].rounding);
    assert!(words[0][0].parse::<u64>().expect("a count") > 2_000_000_000);
    assert_eq!(words[0][..3], words[1][..3], "Rust and C");
    assert_eq!(words[1][3].parse::<f64>().ok(), Some(worst), "Rust and C");
    assert_eq!(words[0][1], "0");
    assert!(worst <= formulas[0].rounding, "{worst:e} {:e}", formulas[0].rounding);
    assert!(formulas[0].rounding <= 20.0 * worst, "{worst:e} {:e}", formulas[0].rounding);
}

/// A level of 9 GHz to 0.1 Hz is beyond single precision, its shift is not.
#[test]
fn single_precision_that_the_level_dwarfs_is_refused_with_the_shift() {
    let mut line = samples::formula("line", samples::polynomial(&[9.0e9, 0.0, 4.0e3]), -0.1, 0.1);
    line.tolerance = 0.1;
    let outcome = samples::outcome("clock", "B", 0.0, vec![line.clone()]);
    let own = |_: f64| Ok(line.valid.clone());
    let error =
        Formula::new(&line, &outcome.control, &NumberFormat::F32, None, &own).expect_err("too coarse");
    assert!(error.diagnostics()[0].action.as_deref().is_some_and(|a| a.contains("value: shift")));
    line.form = samples::polynomial(&[0.0, 0.0, 4.0e3]);
    line.value = ValueKind::Shift;
    let own = |_: f64| Ok(line.valid.clone());
    Formula::new(&line, &outcome.control, &NumberFormat::F32, None, &own).expect("the shift fits");
}
