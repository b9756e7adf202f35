//! Status of an observation.

use serde::{Deserialize, Serialize};
use utoipa::ToSchema;

/// Status of one observation. Codes are those of the SDMX code list `CL_OBS_STATUS`; `Absent` is
/// ours: no upload has named the period.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, Serialize, Deserialize, ToSchema)]
pub enum Status {
    /// `A`, a normal value.
    #[serde(rename = "A")]
    Normal,
    /// `B`, a break in the series.
    #[serde(rename = "B")]
    Break,
    /// `D`, the definition differs.
    #[serde(rename = "D")]
    DefinitionDiffers,
    /// `E`, an estimate.
    #[serde(rename = "E")]
    Estimated,
    /// `F`, a forecast.
    #[serde(rename = "F")]
    Forecast,
    /// `I`, imputed.
    #[serde(rename = "I")]
    Imputed,
    /// `P`, provisional.
    #[serde(rename = "P")]
    Provisional,
    /// `U`, of low reliability.
    #[serde(rename = "U")]
    LowReliability,
    /// `O`, missing without a stated reason.
    #[serde(rename = "O")]
    Missing,
    /// `M`, missing because data cannot exist.
    #[serde(rename = "M")]
    CannotExist,
    /// `L`, missing because data were not collected.
    #[serde(rename = "L")]
    NotCollected,
    /// `Q`, missing because suppressed (confidential).
    #[serde(rename = "Q")]
    Suppressed,
    /// No upload has named this period.
    #[serde(rename = "-")]
    Absent,
}

impl Status {
    /// All of them.
    pub const ALL: [Self; 13] = [
        Self::Normal,
        Self::Break,
        Self::DefinitionDiffers,
        Self::Estimated,
        Self::Forecast,
        Self::Imputed,
        Self::Provisional,
        Self::LowReliability,
        Self::Missing,
        Self::CannotExist,
        Self::NotCollected,
        Self::Suppressed,
        Self::Absent,
    ];

    /// The code as one ASCII byte; the store keeps this byte.
    #[must_use]
    pub fn byte(self) -> u8 {
        match self {
            Self::Normal => b'A',
            Self::Break => b'B',
            Self::DefinitionDiffers => b'D',
            Self::Estimated => b'E',
            Self::Forecast => b'F',
            Self::Imputed => b'I',
            Self::Provisional => b'P',
            Self::LowReliability => b'U',
            Self::Missing => b'O',
            Self::CannotExist => b'M',
            Self::NotCollected => b'L',
            Self::Suppressed => b'Q',
            Self::Absent => b'-',
        }
    }

    /// The status of a byte.
    #[must_use]
    pub fn from_byte(byte: u8) -> Option<Self> {
        Self::ALL.into_iter().find(|s| s.byte() == byte)
    }

    /// Whether an observation of this status has no value.
    #[must_use]
    pub fn is_missing(self) -> bool {
        matches!(
            self,
            Self::Missing
                | Self::CannotExist
                | Self::NotCollected
                | Self::Suppressed
                | Self::Absent
        )
    }

    /// The status that a value calculated from these two carries: missing wins, then forecast,
    /// estimated, imputed, provisional and low reliability; breaks and definitions do not travel.
    #[must_use]
    pub fn combine(self, other: Self) -> Self {
        fn rank(status: Status) -> u8 {
            match status {
                Status::Normal | Status::Break | Status::DefinitionDiffers => 0,
                Status::LowReliability => 1,
                Status::Provisional => 2,
                Status::Imputed => 3,
                Status::Estimated => 4,
                Status::Forecast => 5,
                Status::Suppressed
                | Status::NotCollected
                | Status::CannotExist
                | Status::Missing
                | Status::Absent => 6,
            }
        }
        let worse = if rank(other) > rank(self) {
            other
        } else {
            self
        };
        match rank(worse) {
            0 => Self::Normal,
            6 => Self::Missing,
            _ => worse,
        }
    }
}
