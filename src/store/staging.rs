//! Rows of an upload that outgrew its memory budget, staged until the merge.
//!
//! The table is temporary: it is unlogged, seen by one connection, and gone when the transaction ends.

use std::ops::Range;

use sqlx::{Executor, PgConnection};

use super::Error;
use super::copy::CopyBuffer;
use crate::series::{Piece, Status};

/// Makes the staging table.
///
/// # Errors
/// [`Error::Database`].
pub async fn create(connection: &mut PgConnection) -> Result<(), Error> {
    connection
        .execute(
            r#"CREATE TEMPORARY TABLE staged_piece (
                 group_number integer NOT NULL,
                 periods bytea NOT NULL,
                 "values" double precision[] NOT NULL,
                 status bytea NOT NULL,
                 lines bytea NOT NULL
               ) ON COMMIT DROP"#,
        )
        .await?;
    Ok(())
}

/// Stages pieces, each under the number of its group (one key and unit).
///
/// # Errors
/// [`Error::Database`].
pub async fn insert(connection: &mut PgConnection, pieces: &[(usize, Piece)]) -> Result<(), Error> {
    let mut rows = CopyBuffer::new(5);
    for (group, piece) in pieces {
        let periods: Vec<u8> = piece.periods.iter().flat_map(|p| p.to_be_bytes()).collect();
        let lines: Vec<u8> = piece.lines.iter().flat_map(|l| l.to_be_bytes()).collect();
        let status: Vec<u8> = piece.status.iter().map(|s| s.byte()).collect();
        rows.start_row()
            .integer(number(*group))
            .bytea(&periods)
            .doubles(&piece.values)
            .bytea(&status)
            .bytea(&lines);
    }
    rows.send(
        connection,
        r#"COPY staged_piece (group_number, periods, "values", status, lines) FROM STDIN (FORMAT binary)"#,
    )
    .await
}

/// Makes groups findable, once all are staged.
///
/// # Errors
/// [`Error::Database`].
pub async fn index(connection: &mut PgConnection) -> Result<(), Error> {
    connection
        .execute("CREATE INDEX staged_piece_group ON staged_piece (group_number)")
        .await?;
    Ok(())
}

/// The staged rows of some groups; key and unit are put in by `identity` from the group's number.
///
/// # Errors
/// [`Error`].
pub async fn fetch(
    connection: &mut PgConnection,
    groups: Range<usize>,
    identity: impl Fn(usize) -> Piece,
) -> Result<Vec<(usize, Piece)>, Error> {
    // The table exists in this transaction alone, so the query cannot be checked at compile time.
    type Row = (i32, Vec<u8>, Vec<f64>, Vec<u8>, Vec<u8>);
    let rows: Vec<Row> = sqlx::query_as(
        r#"SELECT group_number, periods, "values", status, lines FROM staged_piece
           WHERE group_number >= $1 AND group_number < $2 ORDER BY group_number"#,
    )
    .bind(number(groups.start))
    .bind(number(groups.end))
    .fetch_all(connection)
    .await?;
    rows.into_iter()
        .map(|(group, periods, values, status, lines)| {
            let group = usize::try_from(group).unwrap_or_default();
            let word = |c: &[u8]| [c[0], c[1], c[2], c[3]];
            let status = status
                .into_iter()
                .map(|b| Status::from_byte(b).ok_or_else(|| Error::corrupt("staged row", "status")))
                .collect::<Result<_, _>>()?;
            let piece = Piece {
                periods: periods
                    .chunks_exact(4)
                    .map(|c| i32::from_be_bytes(word(c)))
                    .collect(),
                values,
                status,
                lines: lines
                    .chunks_exact(4)
                    .map(|c| u32::from_be_bytes(word(c)))
                    .collect(),
                ..identity(group)
            };
            Ok((group, piece))
        })
        .collect()
}

/// Groups are no more than the series of a file, which are limited.
fn number(group: usize) -> i32 {
    i32::try_from(group).unwrap_or(i32::MAX)
}
