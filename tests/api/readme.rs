//! The README's session is run as it stands.

use std::fs;
use std::process::Command;

use crate::support::app::TestApp;

#[tokio::test(flavor = "multi_thread")]
async fn the_session_goes_from_raw_files_to_an_estimate() {
    if Command::new("curl").arg("--version").output().is_err() {
        eprintln!("curl is not installed: the README's session is not tested here");
        return;
    }
    let root = env!("CARGO_MANIFEST_DIR");
    let readme = fs::read_to_string(format!("{root}/README.md")).unwrap();
    let session = readme.split("```sh\n").nth(1).unwrap();
    let session = session.split("```").next().unwrap();
    let app = TestApp::start().await;
    let script = session.replace("http://127.0.0.1:8640", &app.base);
    assert!(
        script.contains(&app.base),
        "the session names the default address"
    );

    let output = Command::new("sh")
        .args(["-euc", &script])
        .current_dir(root)
        .env("no_proxy", "127.0.0.1")
        .output()
        .unwrap();
    let text = String::from_utf8_lossy(&output.stdout);
    let errors = String::from_utf8_lossy(&output.stderr);
    assert!(output.status.success(), "{text}\n{errors}");
    for part in [
        // The dry run keeps nothing.
        "\"id\":null",
        "Balance-of-payments limit",
        "\"series\":\"A.XAA.exports_real\"",
    ] {
        assert!(text.contains(part), "no {part} in:\n{text}");
    }
    app.stop().await;
}

/// What the README calls the two commands is what continuous integration and a stranger run.
#[test]
fn the_two_commands_are_there_word_for_word() {
    let root = env!("CARGO_MANIFEST_DIR");
    let readme = fs::read_to_string(format!("{root}/README.md")).unwrap();
    assert!(readme.contains("\n    ./.ci/setup && cargo run --release -- demo\n"));
    assert!(readme.contains("\n    cargo test\n"));
    let run = fs::read_to_string(format!("{root}/.ci/run")).unwrap();
    assert!(run.contains("\nstage test cargo test\n"));
}
