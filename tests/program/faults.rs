//! A full disk, folders that cannot be written, processes killed at any moment,
//! two at once: every file is whole, of one generation or another, and a mixture
//! of generations is found and mended.

use std::collections::BTreeMap;
use std::fs;
use std::os::unix::process::CommandExt;
use std::path::{Path, PathBuf};
use std::process::{Command, Output, Stdio};
use std::time::{Duration, Instant};

use shiftwright_tests::{Scratch, program, run, text};

/// Two states of one spec that give other numbers in every file.
fn spec(generation: usize) -> String {
    format!(
        "spec: 1
name: lamp
summary: Generation {generation}
systems:
  pair: {{kind: matrix, unit: meV, h0: [[0, 1], [1, {}]], h1: [[0.5, 0], [0, 0]]}}
control: {{symbol: F, unit: kV/cm, within: [-0.5, 0.5]}}
formulas:
  low: {{unit: meV, sum: [{{system: pair, level: 1}}], tolerance: 0.05 meV}}
outputs:
  - {{language: rust, number: f64}}
  - {{language: c, number: f64}}
  - {{language: verilog-a}}
  - {{language: spice}}
",
        3 + generation
    )
}

/// Name of every file of a folder and what it holds; temporary files apart.
fn files(folder: &Path) -> BTreeMap<String, Vec<u8>> {
    let mut found = BTreeMap::new();
    for entry in fs::read_dir(folder).into_iter().flatten() {
        let path = entry.expect("an entry").path();
        let name = path.file_name().and_then(|name| name.to_str()).expect("a name of ours").to_owned();
        if !name.ends_with(".partial") {
            found.insert(name, fs::read(&path).expect("a file"));
        }
    }
    found
}

/// A folder with both states of the spec and what each gives.
struct Bench {
    folder: Scratch,
    generations: [BTreeMap<String, Vec<u8>>; 2],
}

impl Bench {
    fn new(name: &str) -> Self {
        let folder = Scratch::new(name);
        // Both are called the same: the second is the first, changed.
        let generations = [0, 1].map(|generation| {
            let spec_file = format!("{generation}/lamp.yaml");
            folder.write(&spec_file, spec(generation));
            let out = format!("{generation}/fresh");
            let output = run(folder.path(), &["generate", &spec_file, "--out", &out]);
            assert!(output.status.success(), "{}", text(&output));
            files(&folder.path().join(out))
        });
        assert_eq!(generations[0].len(), 6, "{:?}", generations[0].keys());
        for (name, bytes) in &generations[0] {
            assert_ne!(generations[1][name], *bytes, "{name} must tell the generations apart");
        }
        Self { folder, generations }
    }

    fn out(&self) -> PathBuf {
        self.folder.path().join("out")
    }

    fn generate(&self, generation: usize) -> Output {
        run(self.folder.path(), &["generate", &format!("{generation}/lamp.yaml"), "--out", "out"])
    }

    fn check(&self, generation: usize) -> Output {
        run(self.folder.path(), &["check", &format!("{generation}/lamp.yaml"), "--out", "out"])
    }

    /// A child process that generates, its own name free to be killed.
    fn start(&self, generation: usize) -> std::process::Child {
        Command::new(program())
            .args(["generate", &format!("{generation}/lamp.yaml"), "--out", "out"])
            .current_dir(self.folder.path())
            .stdout(Stdio::null())
            .stderr(Stdio::null())
            .spawn()
            .expect("the program starts")
    }

    /// Insists that every file of the folder is whole; says how many are of
    /// each generation.
    fn whole(&self, when: &str) -> [usize; 2] {
        let mut counts = [0; 2];
        for (name, bytes) in files(&self.out()) {
            let of = self.generations.iter().position(|generation| generation.get(&name) == Some(&bytes));
            let of = of.unwrap_or_else(|| panic!("{when}: {name} is of no generation"));
            counts[of] += 1;
        }
        counts
    }

    /// Insists that `check` finds whatever is not the given generation, and
    /// that `generate` mends it.
    fn found_and_mended(&self, generation: usize, when: &str) {
        let complete = files(&self.out()) == self.generations[generation];
        let output = self.check(generation);
        assert_eq!(output.status.code(), Some(i32::from(!complete)), "{when}: {}", text(&output));
        let output = self.generate(generation);
        assert!(output.status.success(), "{when}: {}", text(&output));
        assert_eq!(files(&self.out()), self.generations[generation], "{when}");
        let output = self.check(generation);
        assert_eq!(output.status.code(), Some(0), "{when}: {}", text(&output));
    }
}

/// A sequence of numbers that is the same in every run.
struct Draws(u64);

impl Draws {
    /// The next number below `end`; steps of the multiplier by Knuth's MMIX
    /// (D. E. Knuth, *The Art of Computer Programming*, vol. 2, 3.3.4, table 1).
    fn below(&mut self, end: u64) -> u64 {
        self.0 = self.0.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
        (self.0 >> 33) % end
    }
}

/// Half of the moments fall anywhere in the run, half of them just after the
/// first temporary file appears, where the files are put in place.
#[test]
fn killed_at_200_moments_every_file_is_whole() {
    let bench = Bench::new("killed");
    assert!(bench.generate(0).status.success());
    let begin = Instant::now();
    assert!(bench.generate(1).status.success());
    let whole_run = begin.elapsed();
    let mut draws = Draws(2026);
    let (mut cut, mut mixed) = (0, 0);
    for moment in 0..200 {
        let generation = moment % 2;
        let mut child = bench.start(generation);
        let wait = if moment % 4 < 2 {
            Duration::from_micros(draws.below(whole_run.as_micros() as u64 * 11 / 10))
        } else {
            let temporary = || {
                fs::read_dir(bench.out()).expect("a folder").any(|entry| {
                    entry.is_ok_and(|entry| entry.file_name().to_string_lossy().ends_with(".partial"))
                })
            };
            let patience = Instant::now();
            while !temporary() && patience.elapsed() < 4 * whole_run {
                std::thread::sleep(Duration::from_micros(50));
            }
            Duration::from_micros(draws.below(20_000))
        };
        std::thread::sleep(wait);
        child.kill().expect("killed, or ended before");
        let status = child.wait().expect("it ends");
        cut += usize::from(!status.success());
        let when = format!("moment {moment}, after {wait:?}");
        let counts = bench.whole(&when);
        if counts.iter().all(|count| *count > 0) {
            mixed += 1;
            bench.found_and_mended(generation, &when);
        } else if moment % 20 == 0 {
            bench.found_and_mended(generation, &when);
        }
        // Leftovers would tell the next round that the files are being written.
        for entry in fs::read_dir(bench.out()).expect("a folder") {
            let path = entry.expect("an entry").path();
            if path.to_string_lossy().ends_with(".partial") {
                fs::remove_file(path).expect("removed");
            }
        }
    }
    println!("{cut} of 200 runs were cut short, {mixed} left a mixture");
    assert!(cut >= 50, "only {cut} of 200 runs were cut short");
}

/// Every mixture that a kill between two renames could leave, and those that
/// none could leave; also files that are missing.
#[test]
fn every_mixture_of_generations_is_found_and_mended() {
    let bench = Bench::new("mixture");
    let names: Vec<&String> = bench.generations[0].keys().collect();
    for mixture in 0..(1 << names.len()) {
        let _ = fs::remove_dir_all(bench.out());
        for (bit, name) in names.iter().enumerate() {
            let of = (mixture >> bit) & 1;
            bench.folder.write(&format!("out/{name}"), &bench.generations[of][*name]);
        }
        let when = format!("mixture {mixture:06b}");
        if mixture % 3 == 0 {
            bench.found_and_mended(1, &when);
        } else {
            let complete = mixture + 1 == 1 << names.len();
            let output = bench.check(1);
            assert_eq!(output.status.code(), Some(i32::from(!complete)), "{when}: {}", text(&output));
        }
    }
    for name in names {
        fs::remove_file(bench.out().join(name)).expect("removed");
        bench.found_and_mended(1, name);
    }
}

/// The system ends a file at so many bytes; every file stays as it was.
/// `SIGXFSZ` is held back, so that the write fails as on a full disk.
#[test]
fn a_full_disk_leaves_the_old_files() {
    let bench = Bench::new("full");
    assert!(bench.generate(0).status.success());
    let largest = bench.generations[1].values().map(Vec::len).max().expect("files");
    let mut refused = 0;
    for blocks in 0..=largest / 512 + 1 {
        let script = format!("ulimit -f {blocks}; trap '' XFSZ; exec \"$0\" \"$@\"");
        // The unit of the limit is 512 bytes in a POSIX shell.
        let output = Command::new("sh")
            .args(["-c", &script])
            .arg(program())
            .args(["generate", "1/lamp.yaml", "--out", "out"])
            .current_dir(bench.folder.path())
            .output()
            .expect("a shell");
        let when = format!("{blocks} blocks");
        if output.status.success() {
            break;
        }
        refused += 1;
        assert_eq!(output.status.code(), Some(4), "{when}: {}", text(&output));
        let told = String::from_utf8_lossy(&output.stderr).into_owned();
        assert!(told.contains("out/lamp") && told.contains("(system)") && told.contains("do:"), "{told}");
        assert_eq!(files(&bench.out()), bench.generations[0], "{when}");
        assert_eq!(fs::read_dir(bench.out()).expect("a folder").count(), 6, "{when}: leftovers");
    }
    assert!(refused > 5, "{refused} sizes were refused");
    bench.found_and_mended(1, "after the disk was full");
}

/// Where the result itself cannot be printed, the files are right and the
/// status says so.
#[test]
fn a_full_standard_output_is_told() {
    let bench = Bench::new("stdout");
    let output = Command::new("sh")
        .args(["-c", "exec \"$0\" generate 0/lamp.yaml --out out >/dev/full"])
        .arg(program())
        .current_dir(bench.folder.path())
        .output()
        .expect("a shell");
    assert_eq!(output.status.code(), Some(4), "{}", text(&output));
    assert_eq!(files(&bench.out()), bench.generations[0]);
    // A reader that goes away, such as `head`, is no mistake.
    let output = Command::new("sh")
        .args(["-c", "{ \"$0\" generate 0/lamp.yaml --out out; echo $? >status; } | true"])
        .arg(program())
        .current_dir(bench.folder.path())
        .output()
        .expect("a shell");
    assert!(output.status.success());
    assert_eq!(fs::read_to_string(bench.folder.path().join("status")).expect("a status"), "0\n");
}

/// Folders that cannot be: a file stands in the way, or the user may not write.
#[test]
fn a_folder_that_cannot_be_written_is_told() {
    let bench = Bench::new("folder");
    bench.folder.write("occupied", "mine");
    for out in ["occupied", "occupied/below", "0/lamp.yaml"] {
        let output = run(bench.folder.path(), &["generate", "1/lamp.yaml", "--out", out]);
        assert_eq!(output.status.code(), Some(4), "{out}: {}", text(&output));
        assert!(output.stdout.is_empty());
    }
    assert_eq!(fs::read_to_string(bench.folder.path().join("occupied")).expect("there"), "mine");
    // A folder where a file should be.
    fs::create_dir_all(bench.out().join("lamp.va")).expect("a folder");
    let output = bench.generate(1);
    assert_eq!(output.status.code(), Some(4), "{}", text(&output));
    let output = bench.check(1);
    assert_eq!(output.status.code(), Some(1), "there is no record: {}", text(&output));
    fs::remove_dir_all(bench.out()).expect("removed");

    assert!(bench.generate(0).status.success());
    let mode = |mode| {
        use std::os::unix::fs::PermissionsExt;
        fs::set_permissions(bench.out(), fs::Permissions::from_mode(mode)).expect("a mode");
    };
    mode(0o555);
    // The super-user may write everywhere, so the program becomes somebody else.
    let mut command = Command::new(program());
    command.args(["generate", "1/lamp.yaml", "--out", "out"]).current_dir(bench.folder.path());
    let is_root = String::from_utf8(shiftwright_tests::tool(bench.folder.path(), "id", &["-u"]).stdout)
        .is_ok_and(|id| id.trim() == "0");
    if is_root {
        // Others need not reach the place where the program was built.
        let copy = bench.folder.path().join("shiftwright");
        fs::copy(program(), &copy).expect("a copy");
        command = Command::new(copy);
        command.args(["generate", "1/lamp.yaml", "--out", "out"]).current_dir(bench.folder.path());
        command.uid(65_534).gid(65_534);
    }
    let output = command.output().expect("the program starts");
    mode(0o755);
    assert_eq!(output.status.code(), Some(4), "{}", text(&output));
    assert!(String::from_utf8_lossy(&output.stderr).contains("Permission denied"), "{}", text(&output));
    assert_eq!(files(&bench.out()), bench.generations[0]);
}

/// Runs of both states at once, started together: each ends well, every file
/// is whole, and what is left is judged and mended as ever.
#[test]
fn two_runs_at_once_do_no_harm() {
    let bench = Bench::new("both");
    for round in 0..20 {
        let mut children = [bench.start(0), bench.start(1), bench.start(round % 2)];
        for child in &mut children {
            assert!(child.wait().expect("it ends").success(), "round {round}");
        }
        let counts = bench.whole(&format!("round {round}"));
        assert_eq!(counts.iter().sum::<usize>(), 6, "round {round}");
        assert_eq!(fs::read_dir(bench.out()).expect("a folder").count(), 6, "round {round}: leftovers");
        if round % 5 == 0 || counts.iter().all(|count| *count > 0) {
            bench.found_and_mended(round % 2, &format!("round {round}"));
        }
    }
}
