//! Hostile files, given to the program as a user would give them.

use std::time::Instant;

use shiftwright_tests::{Scratch, run, text};

/// Each ends within a second in a located message with exit status 2, and
/// nothing is written.
#[test]
fn hostile_files_end_soon_in_a_located_message() {
    let folder = Scratch::new("hostile");
    let mut bomb = "a0: &a0 [x, x, x, x, x, x, x, x, x]\n".to_owned();
    for level in 1..30 {
        bomb.push_str(&format!("a{level}: &a{level} [{}]\n", vec![format!("*a{}", level - 1); 9].join(", ")));
    }
    let cases: Vec<(&str, Vec<u8>)> = vec![
        ("bomb", bomb.into_bytes()),
        ("deep", "[".repeat(1 << 20).into_bytes()),
        ("long", format!("spec: 1\nname: {}\n", "a".repeat(1_000_000)).into_bytes()),
        ("large", vec![b'#'; 40 << 20]),
        ("twice", b"spec: 1\nspec: 1\n".to_vec()),
        ("nan", b"spec: 1\nname: .nan\n".to_vec()),
        ("overflow", b"spec: 1\nname: a\ncontrol: {symbol: F, unit: 1, within: [0, 1e400]}\n".to_vec()),
        ("bytes", vec![0xff; 4096]),
        ("zeros", vec![0; 4096]),
        ("tabs", b"spec: 1\n\tname: a\n".to_vec()),
        ("quote", b"spec: \"1\n".to_vec()),
        ("empty", Vec::new()),
        ("list", b"- spec\n".to_vec()),
    ];
    for (name, bytes) in cases {
        let file = format!("{name}.yaml");
        folder.write(&file, &bytes);
        // The program is built before the clock starts.
        let _ = shiftwright_tests::program();
        let begin = Instant::now();
        let output = run(folder.path(), &["generate", &file]);
        let taken = begin.elapsed().as_secs_f64();
        assert_eq!(output.status.code(), Some(2), "{name}: {}", text(&output));
        let told = String::from_utf8_lossy(&output.stderr).into_owned();
        assert!(told.starts_with(&format!("{file}:")) && told.contains(": error: "), "{name}: {told}");
        assert!(taken < 20.0, "{name} takes {taken} s");
        assert!(!folder.path().join("generated").exists(), "{name}");
    }
}
