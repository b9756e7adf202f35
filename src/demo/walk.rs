//! The way of the invented economy's files through the API, told line by line.

use std::io::Write;

use anyhow::Context;
use reqwest::Method;
use serde_json::{Value, json};

use super::client::Client;
use super::economy::{self, Economy, FIRST_YEAR, HOME, LAST_YEAR, SEED};
use super::files::RawFile;

/// The name of the demo's preparation and of its study.
pub const NAME: &str = "demo";
/// The demo's preparation.
pub const PREPARATION: &str = include_str!("../../fixtures/demo/preparation.json");
/// The demo's study: the headline form and the estimator are named before it runs.
pub const STUDY: &str = include_str!("../../fixtures/demo/study.json");

/// What the walk left behind.
pub struct Walked {
    /// Number of the study's run.
    pub run: u64,
    /// The run as a table for people.
    pub table: String,
}

/// Walks the way against the service at `base` and tells it on `out`.
///
/// # Errors
/// A request that fails, an answer of another shape than expected, or `out` that cannot be written.
pub async fn walk(base: &str, out: &mut dyn Write) -> anyhow::Result<Walked> {
    let client = Client::new(base)?;
    let economy = economy::economy(SEED);
    writeln!(
        out,
        "The invented economy {HOME}, {FIRST_YEAR} to {LAST_YEAR}, and its four partners (seed {SEED})\n"
    )?;
    declare(&client, &economy, out).await?;
    for file in &economy.files {
        let answer = send(&client, file).await?;
        let rows = number(&answer, "/report/understood/rows_accepted")?;
        let new = number(&answer, "/report/observations/new")?;
        let series = number(&answer, "/report/series_changed/count")?;
        writeln!(
            out,
            "  sent      {:<24} {rows:>5} rows, {new:>5} new observations in {series} series",
            file.name
        )?;
        for opened in list(&answer, "/report/segments_opened") {
            writeln!(out, "            {}", opened_line(opened))?;
        }
    }
    held_and_withdrawn(&client, &economy.mislabelled, out).await?;

    let path = format!("/v1/preparations/{NAME}");
    client.json(Method::PUT, &path, Some(PREPARATION)).await?;
    let prepared = client
        .json(Method::POST, &format!("{path}/runs"), None)
        .await?;
    writeln!(
        out,
        "  prepared  {} series",
        list(&prepared, "/outputs").len()
    )?;

    let path = format!("/v1/studies/{NAME}");
    client.json(Method::PUT, &path, Some(STUDY)).await?;
    let study = client
        .json(Method::POST, &format!("{path}/runs"), None)
        .await?;
    let run = number(&study, "/id")?;
    writeln!(out, "  studied   run {run}\n")?;
    let table = client.text(&format!("{path}/runs/{run}")).await?;
    writeln!(out, "{}\n", table.trim_end())?;
    Ok(Walked { run, table })
}

/// Commands that look further, for a service that keeps running at `base`.
///
/// # Errors
/// `out` that cannot be written.
pub fn look_further(base: &str, run: u64, out: &mut dyn Write) -> std::io::Result<()> {
    let lines = [
        (
            "the prepared series",
            format!("/v1/series/A.{HOME}.exports_real/observations?growth=log"),
        ),
        (
            "down to upload and line",
            format!("/v1/series/A.{HOME}.exports_real/lineage"),
        ),
        (
            "what was published when",
            format!("/v1/series/Q.{HOME}.exports/vintages"),
        ),
        (
            "the run, every number of it",
            format!("/v1/studies/{NAME}/runs/{run}"),
        ),
    ];
    for (what, path) in lines {
        writeln!(out, "  curl -s \"{base}{path}\"    # {what}")?;
    }
    Ok(())
}

async fn declare(client: &Client, economy: &Economy, out: &mut dyn Write) -> anyhow::Result<()> {
    for money in &economy.moneys {
        let body = json!({ "name": money.name, "areas": [money.area] }).to_string();
        let path = format!("/v1/currencies/{}", money.code);
        client.json(Method::PUT, &path, Some(&body)).await?;
    }
    let codes: Vec<&str> = economy.moneys.iter().map(|m| m.code).collect();
    writeln!(out, "  declared  currencies {}", codes.join(", "))?;
    Ok(())
}

async fn send(client: &Client, file: &RawFile) -> anyhow::Result<Value> {
    let mut query = vec![
        ("kind", file.kind),
        ("released", file.released),
        ("title", file.title),
        ("publisher", file.publisher),
    ];
    query.extend(&file.constants);
    client
        .upload(&query, &file.body)
        .await
        .with_context(|| format!("sending {}", file.name))
}

/// Sends the revision whose unit multiplier is wrong, shows why it is held, and withdraws it.
async fn held_and_withdrawn(
    client: &Client,
    file: &RawFile,
    out: &mut dyn Write,
) -> anyhow::Result<()> {
    let answer = send(client, file).await?;
    let id = number(&answer, "/id")?;
    let state = answer["state"].as_str().unwrap_or("in no known state");
    writeln!(
        out,
        "  {state:<9} {:<24} not served, feeding nothing, because:",
        file.name
    )?;
    for finding in list(&answer, "/report/findings") {
        let text = |field: &str| finding[field].as_str().unwrap_or("").to_owned();
        if text("severity") == "error" {
            writeln!(out, "            {}: {}", text("code"), text("message"))?;
            writeln!(out, "            {}", text("remedy"))?;
        }
    }
    let path = format!("/v1/uploads/{id}");
    let withdrawn = client.json(Method::DELETE, &path, None).await?;
    let state = withdrawn["state"].as_str().unwrap_or("withdrawn");
    writeln!(
        out,
        "  {state} {:<24} exports stay as they were published",
        file.name
    )?;
    Ok(())
}

fn opened_line(opened: &Value) -> String {
    let text = |field: &str| opened[field].as_str().unwrap_or("").to_owned();
    format!(
        "{}: another reference period opens segment {}; nothing is spliced unless a preparation links it",
        text("series"),
        opened["segment"]
    )
}

fn number(answer: &Value, pointer: &str) -> anyhow::Result<u64> {
    answer
        .pointer(pointer)
        .and_then(Value::as_u64)
        .with_context(|| format!("the answer has no number at {pointer}: {answer}"))
}

fn list<'a>(answer: &'a Value, pointer: &str) -> &'a [Value] {
    answer
        .pointer(pointer)
        .and_then(Value::as_array)
        .map_or(&[], Vec::as_slice)
}
