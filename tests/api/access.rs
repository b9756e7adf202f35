//! Who may do what; what is answered before a body comes and while the service stops.

use std::process::Command;

use realterms::config::Settings;
use realterms::http::Application;
use realterms::service::tokens::{self, Role};
use reqwest::Method;
use tokio::net::TcpStream;

use crate::support::app::TestApp;
use crate::support::cluster::{Place, finish, users};
use crate::support::contract::operations;
use crate::support::db::TestDb;
use crate::support::sample::{self, TRADE, TRADE_QUERY};

#[tokio::test]
async fn every_operation_asks_for_its_role() {
    let mut app = TestApp::start().await;
    let mut secrets = Vec::new();
    for role in Role::ALL {
        secrets.push((role, app.token(role.as_str(), role).await));
    }
    for (path, method, operation) in operations() {
        let method: Method = method.to_uppercase().parse().unwrap();
        // An unknown parameter is refused after the role was asked for and before anything is done.
        let path = path.replace(['{', '}'], "") + "?nonesuch=1";
        let description = operation["description"].as_str().unwrap_or_default();
        let least = Role::ALL
            .into_iter()
            .find(|r| description == format!("Role: {} or higher.", r.as_str()));
        assert_eq!(least.is_some(), path.starts_with("/v1/"), "{path}");
        if method != Method::GET {
            assert!(least > Some(Role::Read), "{method} {path}");
        }
        app.use_token(None);
        let answer = app.send(method.clone(), &path, &[], None).await;
        let answer = answer.expect(if least.is_some() { 401 } else { 400 });
        if least.is_some() {
            assert_eq!(answer.at("/code"), "token_missing");
            let asks = answer.header("www-authenticate").unwrap();
            assert!(asks.starts_with("Bearer "), "{asks}");
        }
        for (role, secret) in &secrets {
            app.use_token(Some(secret));
            let answer = app.send(method.clone(), &path, &[], None).await;
            let refused = least.is_some_and(|least| *role < least);
            let answer = answer.expect(if refused { 403 } else { 400 });
            if refused {
                let detail = answer.at("/detail").to_string();
                let (has, needs) = (role.as_str(), least.unwrap().as_str());
                assert!(detail.contains(has) && detail.contains(needs), "{detail}");
            }
        }
    }
    app.use_token(Some("rt_0123"));
    let answer = app.get("/v1/kinds").await.expect(401);
    assert_eq!(answer.at("/code"), "token_unknown");
    app.use_token(None);
    let secret = &secrets[0].1;
    for (header, status) in [
        (format!("Bearer {secret}"), 200),
        (format!("BEARER  {secret}"), 200),
        (format!("Basic {secret}"), 401),
        (secret.clone(), 401),
        (String::new(), 401),
    ] {
        let sent = [("Authorization", header.as_str())];
        let answer = app.send(Method::GET, "/v1/kinds", &sent, None).await;
        answer.expect(status);
    }
    app.stop().await;
}

#[tokio::test]
async fn an_open_service_answers_no_page_from_elsewhere() {
    let mut app = TestApp::start().await;
    let home = app.address.to_string();
    let own = format!("http://{home}");
    for (headers, status) in [
        (vec![("Origin", own.as_str())], 200),
        (vec![("Host", "localhost:1")], 200),
        (vec![("Host", "[::1]")], 200),
        (vec![("Origin", "https://page.example")], 403),
        (vec![("Origin", "null")], 403),
        (vec![("Host", "page.example:8640")], 403),
        (vec![("Host", "127.0.0.1.page.example")], 403),
    ] {
        let answer = app.send(Method::GET, "/v1/kinds", &headers, None).await;
        let answer = answer.expect(status);
        if status == 403 {
            assert_eq!(answer.at("/code"), "foreign_page");
        }
    }
    let secret = app.token("program", Role::Read).await;
    app.use_token(Some(&secret));
    let sent = [("Host", "realterms.example")];
    app.send(Method::GET, "/v1/kinds", &sent, None)
        .await
        .expect(200);
    app.stop().await;
}

#[tokio::test]
async fn the_name_of_the_token_is_the_author() {
    let mut app = TestApp::start().await;
    app.token("statistics office", Role::Contribute).await;
    sample::fill(&app).await;
    for path in [
        "/v1/uploads/1",
        "/v1/studies/sample",
        "/v1/preparations/sample/runs/1",
    ] {
        assert_eq!(app.get(path).await.at("/author"), "statistics office");
    }
    app.stop().await;
}

#[tokio::test]
async fn a_service_that_others_reach_never_works_without_a_token() {
    let everywhere = |settings: &mut Settings| settings.listen = "0.0.0.0:0".parse().unwrap();
    let db = TestDb::create();
    let mut settings = Settings::default();
    everywhere(&mut settings);
    let refused = Application::build(settings.serving(), db.open().await)
        .await
        .err();
    let refused = refused.expect("it does not start").to_string();
    assert!(refused.contains("realterms token create"), "{refused}");

    let secret = db.token("only", Role::Administer).await;
    let mut app = TestApp::start_on(db, everywhere).await;
    app.get("/v1/kinds").await.expect(401);
    app.use_token(Some(&secret));
    app.get("/v1/kinds").await.expect(200);
    let database = app.db.open().await;
    tokens::revoke(&database, "only").await.unwrap();
    database.close().await;
    until(&app, 401).await;
    app.use_token(None);
    // No token is left, and still nobody comes in.
    let answer = app.get("/v1/kinds").await.expect(401);
    assert_eq!(answer.at("/code"), "token_missing");
    // Nor does a start with nothing but revoked tokens.
    let refused = Application::build(settings.serving(), app.db.open().await)
        .await
        .err();
    let refused = refused.expect("it does not start").to_string();
    assert!(refused.contains("no token is valid"), "{refused}");
    app.stop().await;
}

#[tokio::test]
async fn revoking_the_last_token_opens_nothing_at_the_next_start() {
    let db = TestDb::create();
    db.token("only", Role::Administer).await;
    let database = db.open().await;
    tokens::revoke(&database, "only").await.unwrap();
    database.close().await;
    let mut app = TestApp::start_on(db, |_| {}).await;
    let answer = app.get("/v1/kinds").await.expect(401);
    assert_eq!(answer.at("/code"), "token_missing");
    let secret = app.token("another", Role::Read).await;
    app.use_token(Some(&secret));
    app.get("/v1/kinds").await.expect(200);
    app.stop().await;
}

/// Reads until the answer has this status; a token is believed for a second.
async fn until(app: &TestApp, status: u16) {
    let began = std::time::Instant::now();
    while app.get("/v1/kinds").await.status != status {
        assert!(began.elapsed().as_secs() < 20, "not within 20 s");
        tokio::time::sleep(std::time::Duration::from_millis(50)).await;
    }
}

#[tokio::test(flavor = "multi_thread")]
async fn tokens_are_made_listed_and_revoked_by_the_command() {
    let mut app = TestApp::start().await;
    app.get("/v1/kinds").await.expect(200);
    let place = Place::new(&users()[0]);
    let url = app.db.url();
    let token = |arguments: &[&str]| {
        let mut command: Command = place.program(&[&["token"], arguments].concat());
        command.env("REALTERMS_DATABASE_URL", &url);
        finish(command)
    };
    let (made, secret, error) = token(&["create", "--name", "office", "--role", "read"]);
    assert!(made, "{error}");
    let secret = secret.trim();
    assert!(secret.starts_with("rt_") && secret.len() == 51, "{secret}");
    assert!(!error.contains(secret), "secrets are not logged: {error}");
    let (made, said, error) = token(&["create", "--name", "office", "--role", "administer"]);
    assert!(!made && said.is_empty(), "{said}");
    assert!(error.contains("already named 'office'"), "{error}");
    let (made, _, error) = token(&["create", "--name", "x", "--role", "reed"]);
    assert!(
        !made && error.contains("read, contribute, administer"),
        "{error}"
    );

    for name in ["", " ", "a\nb", "office ", &"x".repeat(101)] {
        let (made, _, error) = token(&["create", "--name", name, "--role", "read"]);
        assert!(!made && error.contains("1 to 100 characters"), "{error}");
    }

    // The running service asks for it from now on.
    until(&app, 401).await;
    app.use_token(Some(secret));
    app.get("/v1/kinds").await.expect(200);
    app.delete("/v1/uploads/1").await.expect(403);

    let (_, list, _) = token(&["list"]);
    assert!(
        !list.contains(&secret[3..]),
        "secrets are not listed: {list}"
    );
    let words: Vec<&str> = list.split_whitespace().collect();
    assert_eq!(words[..2], ["office", "read"], "{list}");
    assert_eq!(words.last(), Some(&"valid"), "{list}");
    let (revoked, _, error) = token(&["revoke", "--name", "office"]);
    assert!(revoked, "{error}");
    until(&app, 401).await;
    let (_, list, _) = token(&["list"]);
    assert!(list.contains("revoked 20"), "{list}");
    let (revoked, _, error) = token(&["revoke", "--name", "office"]);
    assert!(
        !revoked && error.contains("no valid token named 'office'"),
        "{error}"
    );
    // The name is free again.
    let (made, again, error) = token(&["create", "--name", "office", "--role", "administer"]);
    assert!(made && again.trim() != secret, "{error}");
    app.use_token(Some(again.trim()));
    until(&app, 200).await;
    app.stop().await;
}

#[tokio::test]
async fn a_body_that_is_too_large_is_refused_before_it_comes() {
    let app = TestApp::start().await;
    for path in [
        format!("/v1/uploads?{TRADE_QUERY}"),
        "/v1/studies/x".to_owned(),
    ] {
        let method = if path.starts_with("/v1/uploads") {
            Method::POST
        } else {
            Method::PUT
        };
        let length = ("Content-Length", "5000000000");
        let expect = ("Expect", "100-continue");
        for headers in [&[length][..], &[length, expect]] {
            let wire = app.wire(method.clone(), &path, headers).await;
            let answer = wire.answer().await.expect(413);
            assert_eq!(answer.at("/code"), "too_large");
            assert_eq!(answer.header("connection"), Some("close"));
        }
    }
    let uploads = app.get("/v1/uploads").await.expect(200);
    assert_eq!(uploads.text(), "[]\n");
    app.stop().await;
    // A body that does not say how long it is is cut off at the limit.
    let app = TestApp::start_with(|s| s.max_upload_bytes = "64KiB".parse().unwrap()).await;
    let chunked = [("Transfer-Encoding", "chunked")];
    let path = "/v1/uploads?kind=ratio&area=XAA&measure=current_account_ratio";
    let mut wire = app.wire(Method::POST, path, &chunked).await;
    let rows = "2019-Q1,100\n".repeat(6000);
    wire.send(format!("{:x}\r\nperiod,value\n{rows}\r\n", rows.len() + 13).as_bytes())
        .await;
    let answer = wire.answer().await.expect(413);
    assert!(answer.text().contains("65536 bytes"), "{}", answer.text());
    let uploads = app.get("/v1/uploads").await.expect(200);
    assert_eq!(uploads.text(), "[]\n");
    app.stop().await;
}

#[tokio::test]
async fn a_request_under_way_is_answered_while_the_service_stops() {
    let app = TestApp::start().await;
    app.put("/v1/currencies/XAL", r#"{"name": "x", "areas": ["XAA"]}"#)
        .await
        .expect(201);
    let length = TRADE.len().to_string();
    let headers = [
        ("Content-Length", length.as_str()),
        ("Expect", "100-continue"),
    ];
    let path = format!("/v1/uploads?{TRADE_QUERY}");
    let mut wire = app.wire(Method::POST, &path, &headers).await;
    // Now the service is at work on it.
    assert_eq!(wire.head().await.0, 100);
    let (first, second) = TRADE.as_bytes().split_at(20);
    wire.send(first).await;
    let stopped = tokio::spawn(app.begin_stop());
    // It has begun to stop when it takes no more connections.
    while TcpStream::connect(app.address).await.is_ok() {
        tokio::time::sleep(std::time::Duration::from_millis(10)).await;
    }
    assert!(!stopped.is_finished());
    wire.send(second).await;
    let answer = wire.answer().await.expect(201);
    assert_eq!(answer.at("/state"), "landed");
    stopped.await.unwrap();
    let database = app.db.open().await;
    let landed: i64 = sqlx::query_scalar("SELECT count(*) FROM upload WHERE state = 'landed'")
        .fetch_one(database.pool())
        .await
        .unwrap();
    assert_eq!(landed, 1);
    app.stop().await;
}
