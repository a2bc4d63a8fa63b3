//! The header, the library and the example agree.

use std::process::Command;

#[test]
fn the_c_example_compiles_without_a_warning_and_runs() {
    let folder = env!("CARGO_MANIFEST_DIR");
    let output = Command::new("bash")
        .arg(format!("{folder}/example/run.sh"))
        .output()
        .expect("bash is there");
    let (said, complained) = (
        String::from_utf8_lossy(&output.stdout),
        String::from_utf8_lossy(&output.stderr),
    );
    assert!(output.status.success(), "{said}\n{complained}");
    assert!(
        said.contains("setting 1-1 took effect at sample 72"),
        "{said}"
    );
}
