//! The demo scenario: every spec's checked-in files are what the program writes
//! today.

use shiftwright_tests::{repository, run, text};

#[test]
fn the_checked_in_files_of_the_demo_are_current() {
    let folder = repository().join("specs");
    let mut names: Vec<String> = std::fs::read_dir(&folder)
        .expect("the demo folder is there")
        .filter_map(|entry| entry.ok()?.file_name().to_str()?.strip_suffix(".yaml").map(str::to_owned))
        .collect();
    names.sort();
    assert!(names.len() >= 14, "{names:?}");
    for name in &names {
        let spec = format!("{name}.yaml");
        let output = run(&folder, &["check", &spec]);
        assert_eq!(output.status.code(), Some(0), "{name}: {}", text(&output));
    }
}
