//! Programs around generated files: they call every function at many inputs
//! and print what comes back.

use std::fmt::Write as _;

use shiftwright::formula::{Formula, Numbers};

/// What a file offers for one formula.
pub struct Callable {
    /// Name of the formula.
    pub name: String,
    /// Names of its inverses.
    pub inverses: Vec<&'static str>,
    /// Bits of control and value in fixed point.
    pub bits: (u32, u32),
}

impl Callable {
    /// The functions of formulas as they were printed.
    pub fn all(formulas: &[Formula]) -> Vec<Self> {
        let one = |formula: &Formula| {
            let (below, above, bits) = match &formula.numbers {
                Numbers::Double(f) | Numbers::Single(f) => {
                    (f.branches.below.is_some(), f.branches.above.is_some(), (0, 0))
                }
                Numbers::Fixed(f) => (f.below.is_some(), f.above.is_some(), (f.control_bits, f.value_bits)),
            };
            Self { name: formula.measured.name.clone(), inverses: inverses(below, above), bits }
        };
        formulas.iter().map(one).collect()
    }
}

/// Names of the inverses by which stretches there are.
pub fn inverses(below: bool, above: bool) -> Vec<&'static str> {
    let mut out = vec!["inverse"];
    if below {
        out.push("inverse_below");
    }
    if above {
        out.push("inverse_above");
    }
    out
}

/// Types and words of a floating-point format in Rust and C.
pub fn float_words(wide: bool) -> [&'static str; 4] {
    if wide { ["f64", "u64", "double", "uint64_t"] } else { ["f32", "u32", "float", "uint32_t"] }
}

/// Reads words of bits and prints the bits of every function.
pub fn float_rust(stem: &str, formulas: &[Callable], wide: bool) -> String {
    let [ty, bits, ..] = float_words(wide);
    let mut out = format!(
        "mod {stem};\nuse std::io::Read;\nuse {stem}::OutOfRange;\n\
         fn show(r: Result<{ty}, OutOfRange>) {{ match r {{ Ok(v) => print!(\" 0:{{:x}}\", v.to_bits()), \
         Err(e) => print!(\" {{}}:\", e as u8 + 1) }} }}\n\
         fn main() {{ let mut s = String::new(); std::io::stdin().read_to_string(&mut s).unwrap();\n\
         let x: Vec<{ty}> = s.split_whitespace().map(|w| {ty}::from_bits({bits}::from_str_radix(w, 16).unwrap())).collect();\n\
         let mut y = vec![0.0; x.len()];\n"
    );
    for Callable { name, inverses, .. } in formulas {
        let _ = writeln!(out, "{stem}::{name}::many(&x, &mut y);");
        let _ = writeln!(out, "for (&x, &y) in x.iter().zip(&y) {{ use {stem}::{name}::*;");
        out.push_str("assert_eq!(value(x).to_bits(), y.to_bits()); print!(\"{:x} {:x}\", y.to_bits(), slope(x).to_bits()); show(checked(x));\n");
        for inverse in inverses {
            let _ = writeln!(out, "show({inverse}(x)); show({inverse}(y));");
        }
        out.push_str("println!(); }\n");
    }
    out.push_str("}\n");
    out
}

/// The same in C.
pub fn float_c(stem: &str, formulas: &[Callable], wide: bool) -> String {
    let [.., ty, bits] = float_words(wide);
    let (read, print) = if wide { ("SCNx64", "PRIx64") } else { ("SCNx32", "PRIx32") };
    let mut out = format!(
        "#include \"{stem}.h\"\n#include <inttypes.h>\n#include <stdio.h>\n#include <string.h>\n\
         static {ty} x[40000];\nstatic {ty} y[40000];\n\
         static {bits} word({ty} v) {{ {bits} w; memcpy(&w, &v, sizeof w); return w; }}\n\
         static void show({stem}_status s, {ty} v) {{ if (s == 0) printf(\" 0:%\" {print}, word(v)); else printf(\" %d:\", (int)s); }}\n\
         int main(void) {{ size_t n = 0; size_t i; {bits} w;\n\
         while (n < 40000 && scanf(\"%\" {read}, &w) == 1) {{ memcpy(&x[n], &w, sizeof w); n++; }}\n"
    );
    for Callable { name, inverses, .. } in formulas {
        let name = format!("{stem}_{name}");
        let _ = writeln!(
            out,
            "memcpy(y, x, sizeof x); {name}_many(y, y, n);\nfor (i = 0; i < n; i++) {{ {ty} v = 0; {stem}_status s;"
        );
        let _ = writeln!(out, "printf(\"%\" {print} \" %\" {print}, word(y[i]), word({name}_slope(x[i])));");
        let _ = writeln!(out, "s = {name}_checked(x[i], &v); show(s, v);");
        for inverse in inverses {
            let _ = writeln!(
                out,
                "s = {name}_{inverse}(x[i], &v); show(s, v); s = {name}_{inverse}(y[i], &v); show(s, v);"
            );
        }
        out.push_str("printf(\"\\n\"); }\n");
    }
    out.push_str("return 0; }\n");
    out
}

/// Counts that a control of so many bits is tried at: all, or a comb through 32 bits.
pub fn codes(bits: u32) -> impl Iterator<Item = i64> {
    let half = 1_i64 << (bits - 1);
    (-half..half).step_by(stride(bits))
}

/// A prime, so that the comb meets every residue.
fn stride(bits: u32) -> usize {
    if bits == 32 { 100_003 } else { 1 }
}

/// Prints a checksum of every answer at [`codes`].
pub fn fixed_rust(stem: &str, formulas: &[Callable]) -> String {
    let mut out = format!(
        "mod {stem};\nuse {stem}::OutOfRange;\n\
         fn mix(s: u64, w: i64) -> u64 {{ (s ^ w as u64).wrapping_mul(0x0000_0100_0000_01b3) }}\n\
         fn put<T: Into<i64>>(s: u64, r: Result<T, OutOfRange>) -> u64 {{ match r {{ Ok(v) => mix(mix(s, 0), v.into()), Err(e) => mix(s, e as i64 + 1) }} }}\n\
         fn main() {{\n"
    );
    for Callable { name, inverses, bits } in formulas {
        let (x, y) = (format!("i{}", bits.0), format!("i{}", bits.1));
        let stride = stride(bits.0);
        let _ = writeln!(out, "{{ use {stem}::{name}::*; let mut s = 0xcbf2_9ce4_8422_2325_u64;");
        let _ = writeln!(
            out,
            "for i in (i64::from({x}::MIN)..=i64::from({x}::MAX)).step_by({stride}) {{ let n = i as {x}; let mut y = [0]; many(&[n], &mut y); let y = y[0]; assert_eq!(y, value(n));"
        );
        let _ = writeln!(out, "s = mix(mix(s, y.into()), slope(n)); s = put(s, checked(n));");
        for inverse in inverses {
            let _ = writeln!(out, "s = put(s, {inverse}(y)); s = put(s, {inverse}(i as {y}));");
        }
        let _ = writeln!(out, "}} println!(\"{name} {{s:x}}\"); }}");
    }
    out.push_str("}\n");
    out
}

/// The same in C.
pub fn fixed_c(stem: &str, formulas: &[Callable]) -> String {
    let mut out = format!(
        "#include \"{stem}.h\"\n#include <inttypes.h>\n#include <stdio.h>\nstatic uint64_t s;\n\
         static void mix(int64_t w) {{ s = (s ^ (uint64_t)w) * UINT64_C(0x100000001b3); }}\n\
         static void put({stem}_status status, int64_t v) {{ mix((int64_t)status); if (status == 0) mix(v); }}\n\
         int main(void) {{ int64_t i;\n"
    );
    for Callable { name, inverses, bits } in formulas {
        let short = name;
        let name = format!("{stem}_{name}");
        let (x, y) = (format!("int{}_t", bits.0), format!("int{}_t", bits.1));
        let (half, stride) = (1_i64 << (bits.0 - 1), stride(bits.0));
        let _ = writeln!(
            out,
            "s = UINT64_C(0xcbf29ce484222325);\nfor (i = -{half}; i < {half}; i += {stride}) {{ {x} n = ({x})i; {x} b = 0; {y} v = 0; {y} y; {stem}_status t;"
        );
        let _ = writeln!(
            out,
            "{name}_many(&n, &y, 1); mix(y); mix({name}_slope(n)); t = {name}_checked(n, &v); put(t, v);"
        );
        for inverse in inverses {
            let _ = writeln!(
                out,
                "t = {name}_{inverse}(y, &b); put(t, b); t = {name}_{inverse}(({y})i, &b); put(t, b);"
            );
        }
        let _ = writeln!(out, "}} printf(\"{short} %\" PRIx64 \"\\n\", s);");
    }
    out.push_str("return 0; }\n");
    out
}
