//! Rows in PostgreSQL's binary COPY format.

use sqlx::PgConnection;

use super::Error;

/// A buffer of rows for one `COPY … FROM STDIN (FORMAT binary)`.
pub(super) struct CopyBuffer {
    bytes: Vec<u8>,
    fields: i16,
}

const SIGNATURE: &[u8] = b"PGCOPY\n\xff\r\n\0\0\0\0\0\0\0\0\0";
const FLOAT8_OID: i32 = 701;

impl CopyBuffer {
    /// A buffer for rows of this many fields.
    pub(super) fn new(fields: i16) -> Self {
        Self {
            bytes: SIGNATURE.to_vec(),
            fields,
        }
    }

    pub(super) fn start_row(&mut self) -> &mut Self {
        self.bytes.extend_from_slice(&self.fields.to_be_bytes());
        self
    }

    pub(super) fn bigint(&mut self, value: i64) -> &mut Self {
        self.field(&value.to_be_bytes())
    }

    pub(super) fn integer(&mut self, value: i32) -> &mut Self {
        self.field(&value.to_be_bytes())
    }

    pub(super) fn bytea(&mut self, value: &[u8]) -> &mut Self {
        self.field(value)
    }

    /// A date as days since 2000-01-01.
    pub(super) fn date(&mut self, date: crate::time::Date) -> &mut Self {
        const DAYS_TO_2000: i32 = 730_120;
        self.integer(date.days() - DAYS_TO_2000)
    }

    pub(super) fn doubles(&mut self, values: &[f64]) -> &mut Self {
        let n = i32::try_from(values.len()).unwrap_or(i32::MAX);
        if n == 0 {
            self.length(12).raw(0).raw(0).raw(FLOAT8_OID);
            return self;
        }
        self.length(20 + n * 12)
            .raw(1)
            .raw(0)
            .raw(FLOAT8_OID)
            .raw(n)
            .raw(1);
        self.bytes.reserve(values.len() * 12);
        for value in values {
            self.bytes.extend_from_slice(&8_i32.to_be_bytes());
            self.bytes.extend_from_slice(&value.to_be_bytes());
        }
        self
    }

    fn field(&mut self, value: &[u8]) -> &mut Self {
        self.length(i32::try_from(value.len()).unwrap_or(i32::MAX));
        self.bytes.extend_from_slice(value);
        self
    }

    fn length(&mut self, n: i32) -> &mut Self {
        self.raw(n)
    }

    fn raw(&mut self, n: i32) -> &mut Self {
        self.bytes.extend_from_slice(&n.to_be_bytes());
        self
    }

    /// Sends the rows.
    pub(super) async fn send(
        mut self,
        connection: &mut PgConnection,
        statement: &'static str,
    ) -> Result<(), Error> {
        const PIECE: usize = 1 << 20;
        self.bytes.extend_from_slice(&(-1_i16).to_be_bytes());
        let mut copy = connection.copy_in_raw(statement).await?;
        for piece in self.bytes.chunks(PIECE) {
            copy.send(piece).await?;
        }
        copy.finish().await?;
        Ok(())
    }
}
