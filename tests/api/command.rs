//! The commands, as a user runs them.

use crate::support::cluster::{Place, finish, users};
use crate::support::db::TestDb;
use clap::{Args, Command};
use realterms::config::Settings;
use sqlx::postgres::{PgConnectOptions, PgSslMode};
use sqlx::{Connection, PgConnection};
use std::path::Path;

#[test]
fn help_shows_every_setting_with_its_variable_and_default() {
    let place = Place::new(&users()[0]);
    let (shown, help, error) = place.run(&["--help"]);
    assert!(shown, "{error}");
    let settings = Settings::augment_args(Command::new("settings"));
    let mut seen = 0;
    for setting in settings.get_arguments() {
        let flag = setting.get_long().expect("each setting has a flag");
        let start = help.find(&format!("--{flag} <")).expect(flag);
        let section = &help[start..];
        let section = &section[..section[2..]
            .find("\n      --")
            .map_or(section.len(), |at| at + 2)];
        let variable = setting.get_env().expect("each setting has a variable");
        let expected = format!("REALTERMS_{}", flag.replace('-', "_").to_uppercase());
        assert_eq!(variable.to_str(), Some(expected.as_str()));
        assert!(section.contains(&format!("[env: {expected}")), "{section}");
        assert!(section.contains("[default: "), "{section}");
        seen += 1;
    }
    assert_eq!(help.matches("[env: REALTERMS_").count(), seen);
}

#[test]
fn a_wrong_setting_is_named_by_flag_and_variable() {
    let place = Place::new(&users()[0]);
    let wrong = [
        ("REALTERMS_LISTEN", "here", "--listen"),
        ("REALTERMS_MAX_UPLOAD_BYTES", "4GB", "--max-upload-bytes"),
        ("REALTERMS_WORKERS", "0", "--workers"),
        ("REALTERMS_BODY_PATIENCE", "86401", "--body-patience"),
        ("REALTERMS_LOG", "x=y=z", "--log"),
    ];
    for (variable, value, flag) in wrong {
        let mut command = place.program(&["database", "where"]);
        command.env(variable, value);
        let (ran, _, error) = finish(command);
        assert!(!ran, "{variable}");
        for part in [variable, value, flag] {
            assert!(error.contains(part), "{part} in {error}");
        }
    }
    let mut command = place.program(&["database", "where"]);
    command.env("REALTERMS_LISEN", "127.0.0.1:1");
    let (ran, _, error) = finish(command);
    assert!(!ran);
    assert!(
        error.contains("REALTERMS_LISEN is not a setting"),
        "{error}"
    );
    assert!(error.contains("REALTERMS_LISTEN"), "{error}");
}

#[test]
fn missing_programs_are_answered_with_the_script_that_installs_them() {
    let place = Place::new(&users()[0]);
    let mut command = place.program(&["database", "start"]);
    command.env("REALTERMS_POSTGRES_BIN", &place.root);
    let (ran, _, error) = finish(command);
    assert!(!ran);
    assert!(
        error.contains("no initdb, no postgres, no pg_dump, no pg_restore"),
        "{error}"
    );
    assert!(error.contains(".ci/setup"), "{error}");
}

#[tokio::test(flavor = "multi_thread")]
async fn a_dump_brings_everything_back_and_a_failed_restore_changes_nothing() {
    for user in users() {
        let place = Place::new(&user);
        let file = place.root.join("all.dump");
        let file = file.to_str().unwrap();

        let held = place.start();
        let (ran, said, error) = place.run(&["database", "where"]);
        assert!(ran, "{error}");
        for part in [
            place.data().to_str().unwrap(),
            &format!("process {} (realterms database start)", held.pid()),
            held.sockets.to_str().unwrap(),
        ] {
            assert!(said.contains(part), "{part} in {said}");
        }
        execute(&held.sockets, "CREATE TABLE kept AS SELECT 1 AS n").await;
        let (ran, _, error) = place.run(&["database", "dump", file]);
        assert!(ran, "a dump goes beside the service: {error}");
        let (ran, _, error) = place.run(&["database", "dump", file]);
        assert!(!ran && error.contains("overwrites nothing"), "{error}");
        let (ran, _, error) = place.run(&["database", "restore", file]);
        assert!(!ran && error.contains("in use by process"), "{error}");
        execute(&held.sockets, "UPDATE kept SET n = 2").await;
        assert!(held.stop().success());

        let broken = place.root.join("broken.dump");
        let bytes = std::fs::read(file).unwrap();
        std::fs::write(&broken, &bytes[..bytes.len() * 3 / 4]).unwrap();
        let (ran, _, error) = place.run(&["database", "restore", broken.to_str().unwrap()]);
        assert!(!ran && error.contains("nothing was changed"), "{error}");
        assert_eq!(kept(&place).await, 2);

        let (ran, _, error) = place.run(&["database", "restore", file]);
        assert!(ran, "{error}");
        assert_eq!(kept(&place).await, 1);
        let (ran, said, error) = place.run(&["database", "where"]);
        assert!(
            ran && said.contains("nobody") && said.contains("not running"),
            "{said}{error}"
        );
    }
}

#[tokio::test(flavor = "multi_thread")]
async fn a_database_of_the_users_is_dumped_without_a_data_folder() {
    let place = Place::new(&users()[0]);
    let db = TestDb::create();
    let file = place.root.join("all.dump");
    let mut command = place.program(&["database", "dump", file.to_str().unwrap()]);
    command.env("REALTERMS_DATABASE_URL", db.url());
    let (ran, _, error) = finish(command);
    assert!(ran && file.exists(), "{error}");
    assert!(!place.data().exists());
}

#[tokio::test(flavor = "multi_thread")]
async fn a_restore_that_was_cut_short_is_undone_by_the_next_start() {
    let place = Place::new(&users()[0]);
    let held = place.start();
    execute(&held.sockets, "CREATE TABLE kept AS SELECT 1 AS n").await;
    // What a restore leaves when it is killed between its steps.
    execute(
        &held.sockets,
        "ALTER SCHEMA realterms RENAME TO realterms_before_restore; CREATE SCHEMA realterms",
    )
    .await;
    assert!(held.stop().success());
    assert_eq!(kept(&place).await, 1);
}

async fn kept(place: &Place) -> i32 {
    let held = place.start();
    let mut connection = connect(&held.sockets).await;
    let n = sqlx::query_scalar("SELECT n FROM kept")
        .fetch_one(&mut connection)
        .await
        .unwrap();
    connection.close().await.unwrap();
    assert!(held.stop().success());
    n
}

async fn execute(sockets: &Path, statements: &'static str) {
    let mut connection = connect(sockets).await;
    sqlx::raw_sql(statements)
        .execute(&mut connection)
        .await
        .unwrap();
    connection.close().await.unwrap();
}

async fn connect(sockets: &Path) -> PgConnection {
    let options = PgConnectOptions::new_without_pgpass()
        .ssl_mode(PgSslMode::Disable)
        .socket(sockets)
        .username("realterms")
        .database("realterms")
        .options([("search_path", "realterms")]);
    PgConnection::connect_with(&options).await.unwrap()
}

#[test]
fn a_folder_that_is_not_there_is_told_and_not_made() {
    let place = Place::new(&users()[0]);
    let file = place.root.join("all.dump");
    for arguments in [
        &["database", "where"][..],
        &["database", "stop"],
        &["database", "dump", file.to_str().unwrap()],
    ] {
        let (ran, _, error) = place.run(arguments);
        assert!(!ran, "{arguments:?}");
        let data = place.data().display().to_string();
        for part in ["there is no data folder at", &data, "REALTERMS_DATA_FOLDER"] {
            assert!(error.contains(part), "{part} in {error}");
        }
        assert!(!place.data().exists(), "{arguments:?}");
    }
    // Nor is a folder of something else one of ours.
    std::fs::create_dir(place.data()).unwrap();
    let (ran, _, error) = place.run(&["database", "where"]);
    assert!(!ran && error.contains("there is no data folder"), "{error}");
    assert_eq!(std::fs::read_dir(place.data()).unwrap().count(), 0);
}

#[test]
fn a_reader_that_leaves_early_is_no_fault() {
    let place = Place::new(&users()[0]);
    let (reader, writer) = std::io::pipe().unwrap();
    drop(reader);
    let mut command = place.program(&["openapi"]);
    let output = command.stdout(writer).output().unwrap();
    assert!(output.status.success(), "{output:?}");
    assert_eq!(String::from_utf8(output.stderr).unwrap(), "");
}
