//! What the end-to-end checks share: the built program, scratch folders, and
//! outside tools that must be there.

use std::path::{Path, PathBuf};
use std::process::{Command, Output};
use std::sync::OnceLock;

/// The repository's top folder.
#[must_use]
pub fn repository() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("..").canonicalize().expect("the repository has a top folder")
}

/// A file of the checks' own data folder, as text.
#[must_use]
pub fn data(name: &str) -> String {
    let path = repository().join("tests/references/data").join(name);
    std::fs::read_to_string(&path).unwrap_or_else(|e| panic!("{}: {e}", path.display()))
}

/// The program, built from the present sources in the profile of this test.
#[must_use]
pub fn program() -> &'static Path {
    static PROGRAM: OnceLock<PathBuf> = OnceLock::new();
    PROGRAM.get_or_init(|| {
        let mut build = Command::new(env!("CARGO"));
        build.args(["build", "--quiet", "-p", "shiftwright"]).current_dir(repository());
        if !cfg!(debug_assertions) {
            build.arg("--release");
        }
        assert!(build.status().expect("cargo runs").success(), "the program does not build");
        // target/PROFILE/deps/this-test, or target/PROFILE/this-program
        let exe = std::env::current_exe().expect("a test knows its own path");
        let folder = exe.parent().expect("a program lies in a folder");
        let profile = if folder.ends_with("deps") { folder.parent().unwrap_or(folder) } else { folder };
        profile.join("shiftwright")
    })
}

/// Runs the program in `folder`.
#[must_use]
pub fn run(folder: &Path, arguments: &[&str]) -> Output {
    Command::new(program())
        .args(arguments)
        .current_dir(folder)
        .env("NO_COLOR", "1")
        .env_remove("CLICOLOR_FORCE")
        .output()
        .expect("the program starts")
}

/// Output of a finished process as text, for messages of failed checks.
#[must_use]
pub fn text(output: &Output) -> String {
    format!(
        "status {:?}\n--- stdout\n{}\n--- stderr\n{}",
        output.status.code(),
        String::from_utf8_lossy(&output.stdout),
        String::from_utf8_lossy(&output.stderr)
    )
}

/// A fresh empty folder for one test, removed when dropped.
pub struct Scratch(PathBuf);

impl Scratch {
    /// A new folder; `name` must differ between tests of one process.
    #[must_use]
    pub fn new(name: &str) -> Self {
        let path = std::env::temp_dir().join(format!("shiftwright-{}-{name}", std::process::id()));
        let _ = std::fs::remove_dir_all(&path);
        std::fs::create_dir_all(&path).expect("a scratch folder can be made");
        Self(path)
    }

    /// Its path.
    #[must_use]
    pub fn path(&self) -> &Path {
        &self.0
    }

    /// Writes a file into it and gives its path.
    pub fn write(&self, name: &str, text: impl AsRef<[u8]>) -> PathBuf {
        let path = self.0.join(name);
        if let Some(parent) = path.parent() {
            std::fs::create_dir_all(parent).expect("a folder can be made");
        }
        std::fs::write(&path, text).expect("a scratch file can be written");
        path
    }
}

impl Drop for Scratch {
    fn drop(&mut self) {
        if std::env::var_os("KEEP").is_none() {
            let _ = std::fs::remove_dir_all(&self.0);
        }
    }
}

/// Runs an outside tool and insists that it succeeds.
///
/// # Panics
/// If the tool is missing (never a silent skip) or fails.
pub fn tool(folder: &Path, name: &str, arguments: &[&str]) -> Output {
    let output =
        Command::new(name).args(arguments).current_dir(folder).output().unwrap_or_else(|e| {
            panic!("{name} is needed by this check and does not start ({e}); see tests/run")
        });
    assert!(output.status.success(), "{name} {arguments:?}: {}", text(&output));
    output
}

/// Generates from a spec text and gives the record; the spec must succeed.
///
/// # Panics
/// If the program does not end with status 0.
#[must_use]
pub fn record(name: &str, spec: &str) -> serde_json::Value {
    let scratch = Scratch::new(name);
    scratch.write("spec.yaml", spec);
    let output = run(scratch.path(), &["generate", "spec.yaml", "--out", "out"]);
    assert_eq!(output.status.code(), Some(0), "{name}\n{spec}\n{}", text(&output));
    let folder = scratch.path().join("out");
    let file = std::fs::read_dir(&folder)
        .expect("the output folder is there")
        .filter_map(Result::ok)
        .map(|entry| entry.path())
        .find(|path| path.to_string_lossy().ends_with(".record.json"))
        .expect("a record is always written");
    serde_json::from_str(&std::fs::read_to_string(file).expect("the record can be read"))
        .expect("the record is JSON")
}

/// A number inside a record by its path, `formulas/edge/coefficients/2`.
///
/// # Panics
/// If there is no number.
#[must_use]
pub fn number(record: &serde_json::Value, path: &str) -> f64 {
    record
        .pointer(&format!("/{path}"))
        .and_then(serde_json::Value::as_f64)
        .unwrap_or_else(|| panic!("no number at {path} in {record:#}"))
}

/// One row of the table that the reference checks print with `--nocapture`.
#[must_use]
pub fn row(what: &str, found: f64, expected: f64, relative: f64) -> String {
    format!("{what:<34} {found:>24.15e} {expected:>24.15e} {relative:>9.1e}")
}

/// Insists that two numbers agree to a relative error.
///
/// # Panics
/// If they do not.
pub fn close(what: &str, found: f64, expected: f64, relative: f64) {
    let error = (found - expected).abs() / expected.abs();
    println!("{}", row(what, found, expected, error));
    assert!(
        error <= relative,
        "{what}: {found:e}, expected {expected:e}, relative error {error:.2e} > {relative:.0e}"
    );
}
