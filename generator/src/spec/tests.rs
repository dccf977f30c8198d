//! Specs that are read, and specs that are refused.

use std::path::{Path, PathBuf};

use super::*;

struct Folder(PathBuf);

impl Loader for Folder {
    fn load(&self, path: &str) -> std::result::Result<Vec<u8>, String> {
        std::fs::read(self.0.join(path)).map_err(|error| error.to_string())
    }
}

fn specs() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("../specs")
}

fn read(text: &str) -> crate::Result<Spec> {
    Document::parse("well.yaml", text.as_bytes(), &Folder(specs()))?.resolve(&[])
}

#[test]
fn every_demo_and_starter_spec_is_read() {
    let mut count = 0;
    for folder in [specs(), specs().join("../templates/new")] {
        for entry in std::fs::read_dir(&folder).unwrap() {
            let path = entry.unwrap().path();
            if path.extension().is_none_or(|ending| ending != "yaml") {
                continue;
            }
            let bytes = std::fs::read(&path).unwrap();
            let name = path.file_name().unwrap().to_str().unwrap();
            let spec = Document::parse(name, &bytes, &Folder(folder.clone())).and_then(|d| d.resolve(&[]));
            match spec {
                Ok(spec) => assert!(!spec.formulas.is_empty() && !spec.inputs.is_empty()),
                Err(error) => panic!("{name}: {:#?}", error.diagnostics()),
            }
            count += 1;
        }
    }
    assert!(count >= 15, "{count}");
}

#[test]
fn numbers_come_out_in_the_units_that_the_stages_take() {
    let spec = read(GOOD).unwrap();
    let Kind::Layers(layers) = &spec.systems[0].kind else { panic!("layers") };
    assert_eq!(layers.stack.len(), 3);
    assert_eq!(layers.stack[1].thickness, 9.0);
    assert_eq!(layers.origin, 16.5);
    assert_eq!(layers.stack[0].edge, Profile::Constant(Tree::Number(0.232)));
    // 60 kV/cm are 0.006 V/nm.
    assert!((layers.field.as_ref().unwrap().value(60.0, 0.0) - 0.006).abs() < 1e-18);
    let input = |path: &str| spec.inputs.iter().find(|one| one.path == path).unwrap();
    assert_eq!(input("constants.well").value, 9.0);
    assert_eq!(input("systems.electron.stack[1].thickness").unit, "nm");
    assert_eq!(input("systems.electron.stack[1].mass").unit, "1");
    assert_eq!(input("control.within[0]").value, -60.0);
    assert_eq!(spec.formulas[0].tolerance, 0.05);
}

#[test]
fn overrides_replace_constants_in_their_own_unit() {
    let document = Document::parse("well.yaml", GOOD.as_bytes(), &NoFiles).unwrap();
    let spec = document.resolve(&[("well".to_owned(), 8.5)]).unwrap();
    let Kind::Layers(layers) = &spec.systems[0].kind else { panic!("layers") };
    assert_eq!(layers.stack[1].thickness, 8.5);
    assert!(document.resolve(&[("wall".to_owned(), 8.5)]).is_err());
}

const GOOD: &str = "\
spec: 1
name: shutter
constants:
  well: 9 nm
  barrier: 232 meV
systems:
  electron:
    kind: layers
    charge: -1
    field: F
    stack:
      - {thickness: 12 nm, edge: barrier, mass: 0.0919}
      - {thickness: well, edge: 0 meV, mass: 0.0665}
      - {thickness: 12 nm, edge: barrier, mass: 0.0919}
control:
  symbol: F
  unit: kV/cm
  within: [-60, 60]
formulas:
  edge:
    unit: meV
    sum:
      - {system: electron, level: 1}
    tolerance: 0.05 meV
";
