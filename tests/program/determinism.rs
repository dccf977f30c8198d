//! The same spec gives the same bytes: over again, on one processor or two, in
//! another language, time zone and folder.

use std::collections::BTreeMap;
use std::path::Path;
use std::process::Command;

use shiftwright_tests::{Scratch, program, repository, text};

/// One demo spec of each kind of system and of each kind of form.
const SPECS: [&str; 6] = ["shutter", "clock", "rotor", "relay", "slot", "dots"];

/// Runs the program with given surroundings; gives what it writes and prints.
fn bytes(
    out: &Path,
    folder: &Path,
    specs: &[String],
    set: &[(&str, &str)],
    before: &[&str],
) -> BTreeMap<String, Vec<u8>> {
    let _ = std::fs::remove_dir_all(out);
    let mut command = match before {
        [] => Command::new(program()),
        [tool, arguments @ ..] => {
            let mut command = Command::new(tool);
            command.args(arguments).arg(program());
            command
        }
    };
    command.arg("generate").args(specs).arg("--out").arg(out).current_dir(folder).env("NO_COLOR", "1");
    for (name, value) in set {
        command.env(name, value);
    }
    let output = command.output().expect("the program starts");
    assert!(output.status.success(), "{}", text(&output));
    let mut found = BTreeMap::new();
    for entry in std::fs::read_dir(out).expect("the output folder") {
        let entry = entry.expect("an entry");
        let name = entry.file_name().to_string_lossy().into_owned();
        found.insert(name, std::fs::read(entry.path()).expect("a file"));
    }
    found
}

#[test]
fn one_spec_gives_one_set_of_bytes() {
    let scratch = Scratch::new("determinism");
    let out = scratch.path().join("out");
    let demo = repository().join("specs");
    let here: Vec<String> = SPECS.iter().map(|name| format!("{name}.yaml")).collect();
    let first = bytes(&out, &demo, &here, &[], &[]);
    assert!(first.len() >= 3 * SPECS.len(), "{:?}", first.keys());

    for round in 0..20 {
        assert_eq!(bytes(&out, &demo, &here, &[], &[]), first, "round {round}");
    }
    for threads in ["1", "2"] {
        let set = [("RAYON_NUM_THREADS", threads)];
        assert_eq!(bytes(&out, &demo, &here, &set, &[]), first, "{threads} threads");
    }
    assert_eq!(bytes(&out, &demo, &here, &[], &["taskset", "-c", "0"]), first, "one processor");
    // A locale that is not installed is asked for all the same: the program must not look.
    for locale in ["C", "de_DE.UTF-8", "tr_TR.UTF-8", "ar_EG.UTF-8"] {
        let set = [("LC_ALL", locale), ("LANG", locale), ("TZ", "Pacific/Apia"), ("COLUMNS", "20")];
        assert_eq!(bytes(&out, &demo, &here, &set, &[]), first, "{locale}");
    }
    // Another folder, files named by their whole path and by a detour.
    let whole: Vec<String> = here.iter().map(|name| demo.join(name).display().to_string()).collect();
    assert_eq!(bytes(&out, scratch.path(), &whole, &[], &[]), first, "another folder");
    let detour: Vec<String> = here.iter().map(|name| format!("generated/.././{name}")).collect();
    assert_eq!(bytes(&out, &demo, &detour, &[], &[]), first, "a detour");
}

/// A sweep runs in parallel and collects in order.
#[test]
fn a_sweep_gives_one_set_of_bytes() {
    let scratch = Scratch::new("sweeps");
    let spec = repository().join("specs/shutter.yaml").display().to_string();
    let mut first = BTreeMap::new();
    for threads in ["1", "2", "3", "2"] {
        for file in ["sweep.csv", "sweep.parquet"] {
            let output = Command::new(program())
                .args(["sweep", &spec, "--vary", "well=uniform(8 nm, 10 nm)", "--draws", "6", "--seed", "5"])
                .args(["--out", file])
                .current_dir(scratch.path())
                .env("RAYON_NUM_THREADS", threads)
                .output()
                .expect("the program starts");
            assert!(output.status.success(), "{}", text(&output));
            let bytes = std::fs::read(scratch.path().join(file)).expect("a file");
            assert_eq!(
                first.entry(file).or_insert_with(|| bytes.clone()),
                &bytes,
                "{file}, {threads} threads"
            );
        }
    }
}
