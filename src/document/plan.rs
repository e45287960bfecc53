//! Plan files: what was planned, for which timetable, and the proof that goes with it.

use super::{Mistake, Mistakes, cases};
use crate::claim::{
    Answer, FloorProof, HallViolation, OutPrices, Placement, Plan, Reason, Unplaced,
};
use crate::clock::{Instant, Span, Zone};
use serde::{Deserialize, Serialize};
use std::path::{Path, PathBuf};
use std::sync::Arc;

/// What a plan file says is known.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum State {
    /// Everything placed, fewer cannot do.
    Proved,
    /// Somewhere between floor and count.
    Between,
    /// Not everything can be placed.
    Impossible,
}

/// A plan file as data.
#[derive(Clone, Debug)]
pub struct PlanFile {
    /// SHA-256 of the timetable's bytes.
    pub timetable: String,
    /// Counts the times the plan was handed out.
    pub revision: u64,
    /// When it was written.
    pub at: Instant,
    /// What it says is known.
    pub state: State,
    /// The plan.
    pub plan: Plan,
    /// Why not fewer; absent in plans that come from outside.
    pub floor: Option<FloorProof>,
    /// Why not everything.
    pub violations: Vec<HallViolation>,
    /// Why not everything, by prices.
    pub out: Option<OutPrices>,
}

/// `NAME.plan.toml` beside `NAME.toml`.
pub fn plan_path(timetable: &Path) -> PathBuf {
    timetable.with_extension("plan.toml")
}

/// `NAME.issued.toml` beside `NAME.toml`.
pub fn issued_path(timetable: &Path) -> PathBuf {
    timetable.with_extension("issued.toml")
}

#[derive(Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
struct Raw {
    format: u32,
    timetable: String,
    #[serde(default)]
    revision: u64,
    at: String,
    state: State,
    #[serde(default, skip_serializing_if = "Option::is_none")]
    proof: Option<RawProof>,
    #[serde(default)]
    placement: Vec<RawPlacement>,
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    unplaced: Vec<RawUnplaced>,
}

#[derive(Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
struct RawPlacement {
    piece: String,
    resource: String,
    start: String,
    end: String,
}

#[derive(Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
struct RawUnplaced {
    piece: String,
    because: String,
}

#[derive(Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
struct RawProof {
    floor: usize,
    by: String,
    #[serde(default, skip_serializing_if = "Option::is_none")]
    at: Option<String>,
    #[serde(default, skip_serializing_if = "Option::is_none")]
    unit: Option<i64>,
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pieces: Vec<String>,
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    prices: Vec<i64>,
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    cases: Vec<String>,
    #[serde(default, skip_serializing_if = "Option::is_none")]
    out: Option<RawOut>,
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    shortage: Vec<RawShortage>,
}

#[derive(Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
struct RawShortage {
    at: String,
    pieces: Vec<String>,
    resources: Vec<String>,
}

#[derive(Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
struct RawOut {
    weight: u64,
    unit: i64,
    pieces: Vec<String>,
    prices: Vec<i64>,
}

/// An RFC 3339 time, to the second.
fn instant(text: &str) -> Option<Instant> {
    let at = chrono::DateTime::parse_from_rfc3339(text).ok()?;
    Some(Instant(at.timestamp()))
}

fn ids(list: &[Arc<str>]) -> Vec<String> {
    list.iter().map(|id| id.to_string()).collect()
}

impl PlanFile {
    /// The file of an answer.
    pub fn of(
        answer: &Answer,
        timetable: String,
        revision: u64,
        at: Instant,
        state: State,
    ) -> PlanFile {
        PlanFile {
            timetable,
            revision,
            at,
            state,
            plan: answer.plan.clone(),
            floor: Some(answer.floor.clone()),
            violations: answer.violations.clone(),
            out: answer.out.clone(),
        }
    }

    /// Its text; `because` puts a reason into words. Times carry the offset of the zone.
    pub fn print(&self, zone: Zone, because: &dyn Fn(&Unplaced) -> String) -> String {
        let time = |at: Instant| zone.rfc3339(at);
        let proof = self.floor.as_ref().map(|floor| RawProof {
            floor: floor.value(),
            by: floor.name().into(),
            at: match floor {
                FloorProof::Clique { at, .. } => at.map(&time),
                _ => None,
            },
            unit: match floor {
                FloorProof::Prices { unit, .. } => Some(*unit),
                _ => None,
            },
            pieces: match floor {
                FloorProof::Cases { .. } => Vec::new(),
                _ => ids(&floor.pieces()),
            },
            cases: match floor {
                FloorProof::Cases { tree, .. } => {
                    let mut lines = Vec::new();
                    cases::print(tree, &time, &mut lines);
                    lines
                }
                _ => Vec::new(),
            },
            prices: match floor {
                FloorProof::Prices { prices, .. } => {
                    prices.iter().map(|(_, price)| *price).collect()
                }
                _ => Vec::new(),
            },
            out: self.out.as_ref().map(|out| RawOut {
                weight: out.weight,
                unit: out.unit,
                pieces: out.prices.iter().map(|(id, _)| id.to_string()).collect(),
                prices: out.prices.iter().map(|(_, price)| *price).collect(),
            }),
            shortage: self
                .violations
                .iter()
                .map(|v| RawShortage {
                    at: time(v.at),
                    pieces: ids(&v.pieces),
                    resources: ids(&v.resources),
                })
                .collect(),
        });
        let raw = Raw {
            format: 1,
            timetable: self.timetable.clone(),
            revision: self.revision,
            at: Zone::UTC.rfc3339(self.at),
            state: self.state,
            proof,
            placement: self
                .plan
                .placements
                .iter()
                .map(|p| RawPlacement {
                    piece: p.piece.to_string(),
                    resource: p.resource.to_string(),
                    start: time(p.span.start),
                    end: time(p.span.end),
                })
                .collect(),
            unplaced: self
                .plan
                .unplaced
                .iter()
                .map(|u| RawUnplaced {
                    piece: u.piece.to_string(),
                    because: because(u),
                })
                .collect(),
        };
        toml_edit::ser::to_string_pretty(&raw).unwrap_or_default()
    }

    /// Reads a plan file; `file` is its name for messages.
    ///
    /// # Errors
    /// [`Mistakes`], with the place.
    pub fn read(file: &str, text: &str) -> Result<PlanFile, Box<Mistakes>> {
        let fail = |at, message: String| {
            Box::new(Mistakes {
                file: file.into(),
                text: text.into(),
                list: vec![Mistake { at, message }],
            })
        };
        let raw: Raw = toml_edit::de::from_str(text).map_err(|error| {
            fail(
                error.span().unwrap_or(0..0),
                format!("this is no plan file: {}", error.message()),
            )
        })?;
        if raw.format != 1 {
            return Err(fail(
                0..0,
                format!(
                    "plan files of format {} are not known; this version reads format 1",
                    raw.format
                ),
            ));
        }
        let time = |written: &str| {
            instant(written).ok_or_else(|| {
                let at = text.find(written).unwrap_or(0);
                fail(
                    at..at + written.len(),
                    "this is no time such as \"2027-01-11T09:00:00+00:00\"".into(),
                )
            })
        };
        let shared = |list: Vec<String>| list.into_iter().map(Arc::from).collect::<Vec<Arc<str>>>();
        let mut plan = Plan::default();
        for p in raw.placement {
            let span = Span {
                start: time(&p.start)?,
                end: time(&p.end)?,
            };
            plan.placements.push(Placement {
                piece: p.piece.into(),
                resource: p.resource.into(),
                span,
            });
        }
        for u in raw.unplaced {
            plan.unplaced.push(Unplaced {
                piece: u.piece.into(),
                because: Reason::Said(u.because.into()),
            });
        }
        let (mut floor, mut violations, mut out) = (None, Vec::new(), None);
        if let Some(proof) = raw.proof {
            let pieces = shared(proof.pieces);
            let parts = (proof.at, proof.unit, &*proof.prices, &*proof.cases);
            let proved = match (&*proof.by, parts) {
                ("clique", (at, None, [], [])) => FloorProof::Clique {
                    at: at.map(|at| time(&at)).transpose()?,
                    pieces,
                },
                ("incompatible", (None, None, [], [])) => FloorProof::Incompatible { pieces },
                ("prices", (None, Some(unit), prices, [])) if prices.len() == pieces.len() => {
                    FloorProof::Prices {
                        unit,
                        prices: pieces.into_iter().zip(prices.iter().copied()).collect(),
                        value: proof.floor,
                    }
                }
                ("cases", (None, None, [], lines)) if pieces.is_empty() => FloorProof::Cases {
                    value: proof.floor,
                    tree: cases::parse(lines, &instant)
                        .map_err(|said| fail(0..0, format!("in its proof by cases, {said}")))?,
                },
                _ => {
                    return Err(fail(
                        0..0,
                        "its proof is of a form that this version does not know".into(),
                    ));
                }
            };
            if proved.value() != proof.floor {
                return Err(fail(
                    0..0,
                    format!(
                        "it claims at least {}, but its proof gives {}",
                        proof.floor,
                        proved.value()
                    ),
                ));
            }
            floor = Some(proved);
            if let Some(raw) = proof.out {
                if raw.pieces.len() != raw.prices.len() {
                    let said = "what stays out has not one price for each piece";
                    return Err(fail(0..0, said.into()));
                }
                out = Some(OutPrices {
                    unit: raw.unit,
                    prices: shared(raw.pieces).into_iter().zip(raw.prices).collect(),
                    weight: raw.weight,
                });
            }
            for v in proof.shortage {
                violations.push(HallViolation {
                    at: time(&v.at)?,
                    pieces: shared(v.pieces),
                    resources: shared(v.resources),
                });
            }
        }
        Ok(PlanFile {
            timetable: raw.timetable,
            revision: raw.revision,
            at: time(&raw.at)?,
            state: raw.state,
            plan,
            floor,
            violations,
            out,
        })
    }
}
