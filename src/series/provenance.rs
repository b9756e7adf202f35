//! Who set each observation, as a run-length list.

/// What set an observation.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Origin {
    /// Nothing: no upload has named the period.
    Absent,
    /// A line of an upload.
    Upload {
        /// Number of the upload.
        id: i64,
        /// Physical line, from 1.
        line: u32,
    },
    /// A run of a preparation.
    Run {
        /// Number of the run.
        id: i64,
    },
}

/// Consecutive observations with one origin; lines advance by a constant step, so that a table
/// sorted in any regular way is one run a series.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct OriginRun {
    /// Number of observations.
    pub length: u32,
    /// Origin of the first.
    pub first: Origin,
    /// Lines from one observation to the next; 0 where there are no lines.
    pub line_step: i64,
}

/// Groups origins, one an observation, into runs.
#[must_use]
pub fn runs(origins: &[Origin]) -> Vec<OriginRun> {
    let mut runs: Vec<OriginRun> = Vec::new();
    for origin in origins {
        if let Some(run) = runs.last_mut()
            && let Some(step) = step_between(nth(run, run.length - 1), *origin)
            && (run.length == 1 || step == run.line_step)
        {
            run.line_step = step;
            run.length += 1;
            continue;
        }
        runs.push(OriginRun {
            length: 1,
            first: *origin,
            line_step: 0,
        });
    }
    runs
}

/// Origins of all observations, one each.
#[must_use]
pub fn expand(runs: &[OriginRun]) -> Vec<Origin> {
    runs.iter()
        .flat_map(|run| (0..run.length).map(move |i| nth(run, i)))
        .collect()
}

fn nth(run: &OriginRun, i: u32) -> Origin {
    match run.first {
        Origin::Upload { id, line } => {
            let line = i64::from(line) + run.line_step * i64::from(i);
            Origin::Upload {
                id,
                line: u32::try_from(line).unwrap_or(u32::MAX),
            }
        }
        other @ (Origin::Absent | Origin::Run { .. }) => other,
    }
}

fn step_between(last: Origin, next: Origin) -> Option<i64> {
    match (last, next) {
        (Origin::Upload { id: a, line: x }, Origin::Upload { id: b, line: y }) if a == b => {
            Some(i64::from(y) - i64::from(x))
        }
        (Origin::Absent, Origin::Absent) => Some(0),
        (Origin::Run { id: a }, Origin::Run { id: b }) if a == b => Some(0),
        _ => None,
    }
}

/// Packs runs into bytes for the store: for each run its length, a tag, and by tag the number and,
/// for uploads, the first line and the step; all as variable-length integers of seven bits a byte.
#[must_use]
pub fn encode(runs: &[OriginRun]) -> Vec<u8> {
    let mut bytes = Vec::with_capacity(runs.len() * 8);
    for run in runs {
        put(&mut bytes, u64::from(run.length));
        match run.first {
            Origin::Absent => put(&mut bytes, 0),
            Origin::Upload { id, line } => {
                put(&mut bytes, 1);
                put(&mut bytes, id.unsigned_abs());
                put(&mut bytes, u64::from(line));
                let zigzag = (run.line_step << 1) ^ (run.line_step >> 63);
                put(&mut bytes, u64::from_le_bytes(zigzag.to_le_bytes()));
            }
            Origin::Run { id } => {
                put(&mut bytes, 2);
                put(&mut bytes, id.unsigned_abs());
            }
        }
    }
    bytes
}

/// Unpacks what [`encode`] packed; `None` for bytes that it did not write.
#[must_use]
pub fn decode(mut bytes: &[u8]) -> Option<Vec<OriginRun>> {
    let mut runs = Vec::new();
    while !bytes.is_empty() {
        let length = u32::try_from(take(&mut bytes)?).ok()?;
        let (first, line_step) = match take(&mut bytes)? {
            0 => (Origin::Absent, 0),
            1 => {
                let id = i64::try_from(take(&mut bytes)?).ok()?;
                let line = u32::try_from(take(&mut bytes)?).ok()?;
                let zigzag = take(&mut bytes)?;
                let magnitude = i64::try_from(zigzag >> 1).ok()?;
                let step = if zigzag & 1 == 0 {
                    magnitude
                } else {
                    -magnitude - 1
                };
                (Origin::Upload { id, line }, step)
            }
            2 => {
                let id = i64::try_from(take(&mut bytes)?).ok()?;
                (Origin::Run { id }, 0)
            }
            _ => return None,
        };
        runs.push(OriginRun {
            length,
            first,
            line_step,
        });
    }
    Some(runs)
}

fn put(bytes: &mut Vec<u8>, mut n: u64) {
    loop {
        let low = n.to_le_bytes()[0] & 0x7f;
        n >>= 7;
        if n == 0 {
            bytes.push(low);
            return;
        }
        bytes.push(low | 0x80);
    }
}

fn take(bytes: &mut &[u8]) -> Option<u64> {
    let mut n = 0_u64;
    for shift in (0..64).step_by(7) {
        let (first, rest) = bytes.split_first()?;
        *bytes = rest;
        n |= u64::from(first & 0x7f) << shift;
        if first & 0x80 == 0 {
            return Some(n);
        }
    }
    None
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::*;

    fn any_origin() -> impl Strategy<Value = Origin> {
        prop_oneof![
            Just(Origin::Absent),
            (1..4_i64, 1..60_u32).prop_map(|(id, line)| Origin::Upload { id, line }),
            (1..3_i64).prop_map(|id| Origin::Run { id }),
        ]
    }

    proptest! {
        #[test]
        fn packing_loses_nothing(origins in prop::collection::vec(any_origin(), 0..50)) {
            let packed = encode(&runs(&origins));
            prop_assert_eq!(expand(&decode(&packed).unwrap()), origins);
        }
    }

    #[test]
    fn a_regular_table_is_one_run() {
        let origins: Vec<_> = (0..500)
            .map(|i| Origin::Upload {
                id: 7,
                line: 2 + i * 20,
            })
            .collect();
        assert_eq!(runs(&origins).len(), 1);
        assert!(encode(&runs(&origins)).len() < 10);
    }
}
