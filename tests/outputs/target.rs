//! Single precision and fixed point on emulated Cortex-M4F and Cortex-M0.

use std::process::Command;

use shiftwright::diagnostic::Place;
use shiftwright::emit::{self, Target};
use shiftwright::formula::{FloatForm, NumberFormat, Numbers};
use shiftwright::spec::Count;
use shiftwright_runtime::{fixed, single};
use shiftwright_tests::{Scratch, repository, text, tool};

use crate::samples;

const COMMON: &[&str] =
    &["-mthumb", "-std=c99", "-O2", "-ffreestanding", "-fno-builtin", "-ffunction-sections"];
const M4F: &[&str] = &["-mcpu=cortex-m4", "-mfpu=fpv4-sp-d16", "-mfloat-abi=hard"];
const M0: &[&str] = &["-mcpu=cortex-m0", "-mfloat-abi=soft"];

/// Instructions of one function, as disassembled; a function without loops executes at most these.
fn instructions(scratch: &Scratch, object: &str, symbol: &str) -> usize {
    let output = tool(scratch.path(), "arm-none-eabi-objdump", &["-d", "--no-show-raw-insn", object]);
    let listing = String::from_utf8(output.stdout).expect("text");
    let mut inside = false;
    let mut count = 0;
    for line in listing.lines() {
        if line.ends_with(">:") {
            inside = line.ends_with(&format!("<{symbol}>:"));
        } else if inside && line.contains(":\t") && !line.contains(".word") && !line.contains(".short") {
            count += 1;
        }
    }
    assert!(count > 0, "{symbol} is in the listing");
    count
}

/// Bytes of code.
fn code(scratch: &Scratch, object: &str) -> usize {
    let output = tool(scratch.path(), "arm-none-eabi-size", &[object]);
    let listing = String::from_utf8(output.stdout).expect("text");
    let row = listing.lines().nth(1).and_then(|l| l.split_whitespace().next().map(str::to_owned));
    row.and_then(|w| w.parse().ok()).expect("a number of bytes")
}

#[test]
fn emulated_targets_give_the_bits_of_the_host() {
    let shape = samples::every_shape(12.3).remove(1);
    let outcome = samples::outcome("shutter", "F", 12.3, vec![shape]);
    let place = Place { file: "shutter.yaml".to_owned(), start: 0, end: 1 };
    let count = |bits, step| Count { bits, step, place: place.clone() };
    let counts = NumberFormat::Fixed { control: count(16, 0.01), value: count(32, 1e-3) };
    let scratch = Scratch::new("target");
    let floats = samples::in_format(&outcome, &NumberFormat::F32);
    let whole = samples::in_format(&outcome, &counts);
    for (stem, formulas) in [("shutter_f32", &floats), ("shutter_fixed", &whole)] {
        for source in emit::files(&outcome, Target::C, stem, formulas).expect("files are printed") {
            scratch.write(&source.file, &source.text);
        }
    }
    // The host's answers, from the runtime crate.
    let Numbers::Single(float) = &floats[0].numbers else { panic!("a float") };
    let FloatForm::Polynomial(c) = &float.form else { panic!("a polynomial") };
    let c: Vec<f32> = c.iter().map(|c| *c as f32).collect();
    let single = single::Formula {
        from: float.from as f32,
        to: float.to as f32,
        at: float.at as f32,
        rounding: float.rounding as f32,
        form: single::Form::Polynomial(&c),
    };
    let Numbers::Fixed(n) = &whole[0].numbers else { panic!("counts") };
    let shiftwright::formula::FixedForm::Polynomial { value, slope } = &n.form else {
        panic!("a polynomial")
    };
    let fixed = fixed::Formula {
        from: n.from,
        to: n.to,
        origin: n.origin,
        rounding: n.rounding,
        bits: n.control_bits,
        form: fixed::Form::Polynomial { value: &value.rungs, slope: &slope.rungs },
    };
    let (mut f, mut q) = (2_166_136_261_u32, 2_166_136_261_u32);
    let mix = |h: &mut u32, w: u32| *h = (*h ^ w).wrapping_mul(16_777_619);
    let main = single.branches().main;
    for i in (-32_768_i32..32_768).step_by(7) {
        let x = i as f32 * 0.0078125;
        mix(&mut f, single.value(x).to_bits());
        mix(&mut f, single.slope(x).to_bits());
        mix(&mut f, single.inverse_on(single.value(x), &main).map_or(0, f32::to_bits));
        let y = fixed.value(i64::from(i));
        mix(&mut q, y as u32);
        mix(&mut q, fixed.slope(i64::from(i)) as u32);
        mix(&mut q, fixed.inverse_on(y, &n.main).map_or(0, |n| n as u32));
    }
    scratch.write("main.c", format!(
        "#include \"shutter_f32.h\"\n#include \"shutter_fixed.h\"\n\
         static uint32_t bits(float x) {{ union {{ float f; uint32_t u; }} w; w.f = x; return w.u; }}\n\
         static void mix(uint32_t *h, uint32_t w) {{ *h = (*h ^ w) * 16777619u; }}\n\
         int main(void) {{ uint32_t f = 2166136261u; uint32_t q = 2166136261u; int32_t i;\n\
         for (i = -32768; i < 32768; i += 7) {{ float x = (float)i * 0.0078125f; float b = 0.0f; int16_t n = 0; int32_t y;\n\
         mix(&f, bits(shutter_f32_onset(x))); mix(&f, bits(shutter_f32_onset_slope(x)));\n\
         (void)shutter_f32_onset_inverse(shutter_f32_onset(x), &b); mix(&f, bits(b));\n\
         y = shutter_fixed_onset((int16_t)i); mix(&q, (uint32_t)y); mix(&q, (uint32_t)shutter_fixed_onset_slope((int16_t)i));\n\
         (void)shutter_fixed_onset_inverse(y, &n); mix(&q, (uint32_t)(int32_t)n); }}\n\
         return (f == {f}u ? 0 : 1) + (q == {q}u ? 0 : 2); }}\n"
    ));
    for name in ["startup.c", "link.ld"] {
        let path = repository().join("tests/outputs/arm").join(name);
        scratch.write(name, std::fs::read(path).expect("our own start-up"));
    }
    let path = scratch.path();
    let mut rows = Vec::new();
    for (cpu, flags, machine) in [("m4f", M4F, "mps2-an386"), ("m0", M0, "microbit")] {
        for stem in ["shutter_f32", "shutter_fixed"] {
            let (source, object) = (format!("{stem}.c"), format!("{stem}-{cpu}.o"));
            tool(path, "arm-none-eabi-gcc", &[flags, COMMON, &["-c", &source, "-o", &object]].concat());
            let small = format!("{stem}-{cpu}-small.o");
            let sized = [flags, COMMON, &["-Os", "-c", &source, "-o", &small]].concat();
            tool(path, "arm-none-eabi-gcc", &sized);
            let row = (
                instructions(&scratch, &object, &format!("{stem}_onset")),
                code(&scratch, &object),
                code(&scratch, &small),
            );
            println!(
                "{cpu} {stem}: value {} instructions, text {} bytes at -O2, {} at -Os",
                row.0, row.1, row.2
            );
            rows.push(row);
        }
        let link = [
            "main.c",
            "startup.c",
            "shutter_f32.c",
            "shutter_fixed.c",
            "-nostartfiles",
            "-Wl,--gc-sections",
            "-T",
            "link.ld",
            "-o",
            "out.elf",
        ];
        tool(path, "arm-none-eabi-gcc", &[flags, COMMON, &link].concat());
        let output = Command::new("timeout")
            .args([
                "120",
                "qemu-system-arm",
                "-M",
                machine,
                "-nographic",
                "-monitor",
                "none",
                "-serial",
                "null",
            ])
            .args(["-semihosting-config", "enable=on,target=native", "-kernel", "out.elf"])
            .current_dir(path)
            .stdin(std::process::Stdio::null())
            .output()
            .expect("the emulator starts");
        assert_eq!(
            output.status.code(),
            Some(0),
            "{cpu}: 1 is single precision, 2 fixed point: {}",
            text(&output)
        );
    }
    assert!(rows[0].0 <= 12, "single precision on M4F");
    assert!(rows[3].0 <= 60, "fixed point on M0");
    assert!(rows[0].2 < 900, "one single-precision formula with everything");
}
