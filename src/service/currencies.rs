//! Currencies that users declare.

use std::collections::{BTreeMap, BTreeSet};

use serde::Deserialize;
use utoipa::ToSchema;

use super::views::CurrencyView;
use super::{Fault, documents};
use crate::finding::Finding;
use crate::intake;
use crate::series::{CurrencyCode, SeriesKey, is_iso_4217};
use crate::store::{self, Connection, Database};
use crate::time::Frequency;

/// What a user says of a currency.
#[derive(Clone, Debug, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub struct Declaration {
    /// Its name.
    pub name: String,
    /// Areas whose own money it is; their series in it have no currency in their keys.
    #[serde(default)]
    pub areas: Vec<String>,
}

/// Declares a currency, or says of an ISO 4217 currency whose own money it is. True where new.
///
/// # Errors
/// [`Fault::Invalid`] for a wrong code, area or body, or an area that has a money already.
pub async fn declare(
    database: &Database,
    code: &str,
    body: &str,
) -> Result<(CurrencyView, bool), Fault> {
    let code = CurrencyCode::parse(code).map_err(|e| {
        let finding = Finding::error("bad_currency", e.to_string())
            .found(code)
            .expected("three capital letters");
        Fault::invalid("bad_currency", vec![finding])
    })?;
    let declaration: Declaration = documents::parse_json(body, &["name", "areas"])?;
    if declaration.name.trim().is_empty() || declaration.name.contains(char::is_control) {
        let finding = Finding::error("bad_name", "the name is empty or holds control characters")
            .at_pointer("/name")
            .found(declaration.name.escape_default().to_string())
            .expected("a name to show, such as Dinar of XAA");
        return Err(Fault::invalid("bad_name", vec![finding]));
    }
    for (i, area) in declaration.areas.iter().enumerate() {
        if let Err(e) = SeriesKey::new(Frequency::Annual, [area, "x", "", "", "", "", ""]) {
            let finding = Finding::error("bad_area", e.reason)
                .at_pointer(format!("/areas/{i}"))
                .found(area.as_str());
            return Err(Fault::invalid("bad_area", vec![finding]));
        }
    }
    let mut transaction = database.begin().await?;
    store::currency::lock(&mut transaction).await?;
    for row in store::currency::list(&mut transaction).await? {
        if row.code != code.as_str()
            && let Some(area) = row.areas.iter().find(|a| declaration.areas.contains(a))
        {
            return Err(Fault::Conflict {
                code: "area_has_money",
                detail: format!(
                    "{} is declared as the own money of {area}; declare {} without that area first",
                    row.code, row.code
                ),
            });
        }
    }
    let created = store::currency::put(
        &mut transaction,
        code.as_str(),
        &declaration.name,
        &declaration.areas,
    )
    .await?;
    store::commit(transaction).await?;
    let view = CurrencyView {
        code: code.to_string(),
        name: declaration.name,
        areas: declaration.areas,
        iso_4217: is_iso_4217(code),
    };
    Ok((view, created))
}

/// All declared currencies.
///
/// # Errors
/// [`Fault::Store`].
pub async fn list(database: &Database) -> Result<Vec<CurrencyView>, Fault> {
    let mut connection = database.connection().await?;
    Ok(store::currency::list(&mut connection)
        .await?
        .into_iter()
        .map(view)
        .collect())
}

/// One declared currency.
///
/// # Errors
/// [`Fault::NotFound`]; [`Fault::Store`].
pub async fn get(database: &Database, code: &str) -> Result<CurrencyView, Fault> {
    list(database)
        .await?
        .into_iter()
        .find(|c| c.code == code)
        .ok_or_else(|| Fault::not_found(format!("declared currency '{code}'")))
}

/// Takes a declaration back.
///
/// # Errors
/// [`Fault::NotFound`]; [`Fault::Conflict`] while series use it: of a currency that ISO 4217 lists, those of the
/// areas whose own money it is declared to be.
pub async fn delete(database: &Database, code: &str) -> Result<(), Fault> {
    let mut transaction = database.begin().await?;
    store::currency::lock(&mut transaction).await?;
    let listed = CurrencyCode::parse(code).is_ok_and(is_iso_4217);
    let used = match listed {
        true => store::currency::own_money_in_use(&mut transaction, code).await?,
        false => store::currency::in_use(&mut transaction, code).await?,
    };
    if used {
        return Err(Fault::Conflict {
            code: "currency_in_use",
            detail: format!("series are stored in {code}; the declaration explains them and stays"),
        });
    }
    if !store::currency::delete(&mut transaction, code).await? {
        return Err(Fault::not_found(format!("declared currency '{code}'")));
    }
    store::commit(transaction).await?;
    Ok(())
}

/// What intake must know of currencies.
pub(super) async fn context(connection: &mut Connection) -> Result<intake::Context, Fault> {
    let mut declared = BTreeSet::new();
    let mut own_money = BTreeMap::new();
    for row in store::currency::list(connection).await? {
        if let Ok(code) = CurrencyCode::parse(&row.code) {
            declared.insert(code);
            own_money.extend(row.areas.into_iter().map(|area| (area, code)));
        }
    }
    Ok(intake::Context {
        declared,
        own_money,
    })
}

fn view(row: store::currency::CurrencyRow) -> CurrencyView {
    CurrencyView {
        iso_4217: CurrencyCode::parse(&row.code).is_ok_and(is_iso_4217),
        code: row.code,
        name: row.name,
        areas: row.areas,
    }
}
