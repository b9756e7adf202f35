//! What a new segment would link to: proposed in the report of an upload, never done by itself.

use super::Fault;
use super::views::{OpenedSegment, ProposedLink};
use crate::series::Series;
use crate::series::algebra::link;
use crate::store::Connection;
use crate::store::series::StoredSegment;
use crate::store::vintage::{self, AsOf, ReadVintage};

/// Segments for which a link is worked out; a table of thousands needs no thousand proposals.
const SHOWN: usize = 20;

/// Describes opened segments beside the ones that were there.
pub(super) async fn opened_segments(
    connection: &mut Connection,
    opened: &[StoredSegment],
) -> Result<Vec<OpenedSegment>, Fault> {
    let mut views = Vec::new();
    for segment in opened.iter().take(SHOWN) {
        let Some(new) = read(connection, segment, segment.number).await? else {
            continue;
        };
        let mut before = None;
        for number in (1..segment.number).rev() {
            before = read(connection, segment, number).await?;
            if before.as_ref().is_some_and(|b| !b.values.is_empty()) {
                break;
            }
        }
        let Some(before) = before else { continue };
        views.push(OpenedSegment {
            series: segment.key.to_string(),
            segment: segment.number,
            unit: new.unit.to_string(),
            before: before.unit.to_string(),
            proposed_link: propose(&series(new), &series(before)),
        });
    }
    Ok(views)
}

async fn read(
    connection: &mut Connection,
    segment: &StoredSegment,
    number: i32,
) -> Result<Option<ReadVintage>, Fault> {
    let as_of = AsOf {
        segment: Some(number),
        ..AsOf::default()
    };
    Ok(vintage::read(connection, &segment.key, as_of).await?)
}

/// The series of a stored vintage.
pub(super) fn series(vintage: ReadVintage) -> Series {
    Series {
        unit: vintage.unit,
        start: vintage.start,
        values: vintage.values,
        status: vintage.status,
    }
}

fn propose(new: &Series, before: &Series) -> Option<ProposedLink> {
    let linked = link(new, before, None).ok()?;
    Some(ProposedLink {
        factor: linked.factor,
        from: linked.overlap.0.to_string(),
        to: linked.overlap.1.to_string(),
        spread: linked.spread,
        growth_effect_log_percent: 100.0 * (1.0 + linked.spread).ln(),
    })
}
