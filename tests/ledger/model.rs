//! The ledger beside a plain list: whatever happens to it, it answers alike.

use super::{NOW, all, event, fresh, reading};
use halfcell::electrode::history::{ProbeKind, Tag};
use halfcell::electrode::units::Timestamp;
use halfcell::ledger::event::Body;
use halfcell::ledger::{Ledger, PointId, Reader};
use halfcell::watch::reading::Reading;
use proptest::prelude::*;

/// What may happen.
#[derive(Debug, Clone)]
enum Happens {
    Append(Vec<(i64, i32, bool)>),
    Import(Vec<(i64, i32, bool)>),
    ImportAgain,
    StepAndAppend(i64),
    SealBefore(i64),
    SealAll,
    Prune(i64),
    CrashAndReopen,
}

fn rows() -> impl Strategy<Value = Vec<(i64, i32, bool)>> {
    // A coarse grid of times and figures, so that repeated and conflicting rows are common.
    prop::collection::vec((0_i64..400, -3..3_i32, any::<bool>()), 0..30)
}

fn happens() -> impl Strategy<Value = Happens> {
    prop_oneof![
        3 => rows().prop_map(Happens::Append),
        3 => rows().prop_map(Happens::Import),
        1 => Just(Happens::ImportAgain),
        1 => (0_i64..400).prop_map(Happens::StepAndAppend),
        2 => (0_i64..400).prop_map(Happens::SealBefore),
        1 => Just(Happens::SealAll),
        1 => (0_i64..400).prop_map(Happens::Prune),
        1 => Just(Happens::CrashAndReopen),
    ]
}

/// 100 s apart: 36 to the hour.
const GRID_MS: i64 = 100_000;

proptest! {
    #![proptest_config(ProptestConfig::with_cases(40))]
    #[test]
    fn whatever_happens_the_ledger_answers_as_a_list_would(story in prop::collection::vec(happens(), 1..25)) {
        let mut f = fresh();
        let other = f.ledger.point(&Tag::from("TANK-1"), ProbeKind::Orp).unwrap();
        let points = [f.point, other];
        let mut model: Vec<(PointId, Reading)> = Vec::new();
        let mut last_import: Vec<(PointId, Reading)> = Vec::new();
        let mut n_copies = 0;
        let make = |rows: &[(i64, i32, bool)]| -> Vec<(PointId, Reading)> {
            rows.iter()
                .map(|(t, mv, first)| (points[usize::from(*first)], Reading { value: (*mv != 0).then_some(7.5), ..reading(t * GRID_MS, f64::from(*mv) / 10.0) }))
                .collect()
        };
        for happens in story {
            match happens {
                Happens::Append(rows) => {
                    let rows = make(&rows);
                    f.ledger.append(&rows, &[]).unwrap();
                    model.extend(rows);
                }
                Happens::StepAndAppend(t) => {
                    let step = Body::ClockStep { before: NOW, after: Timestamp::from_ms(t * GRID_MS), seq: 0 };
                    let rows = make(&[(t, 1, true), (t + 1, 2, false)]);
                    f.ledger.append(&rows, &[event(t, step)]).unwrap();
                    model.extend(rows);
                }
                Happens::Import(rows) => {
                    last_import = make(&rows);
                    import(&mut f.ledger, &mut model, &last_import);
                }
                Happens::ImportAgain => {
                    let n = import(&mut f.ledger, &mut model, &last_import);
                    prop_assert_eq!(n, 0, "the same import again keeps nothing");
                }
                Happens::SealBefore(t) => f.ledger.seal_before(Timestamp::from_ms(t * GRID_MS), NOW).unwrap(),
                Happens::SealAll => f.ledger.seal_all(NOW).unwrap(),
                Happens::Prune(t) => while f.ledger.prune_some(Timestamp::from_ms(t * GRID_MS)).unwrap() {},
                Happens::CrashAndReopen => {
                    n_copies += 1;
                    // The files as a killed process leaves them: copied while open, log and all.
                    let copy = f.folder.path().join(format!("copy-{n_copies}.db"));
                    for end in ["", "-wal"] {
                        let file = |path: &std::path::Path| format!("{}{end}", path.display());
                        if std::path::Path::new(&file(&f.path)).exists() {
                            std::fs::copy(file(&f.path), file(&copy)).unwrap();
                        }
                    }
                    f.ledger = Ledger::open(&copy).unwrap();
                    f.path = copy;
                }
            }
        }
        let reader = Reader::open(&f.path).unwrap();
        let report = reader.audit().unwrap();
        prop_assert!(report.is_sound(), "{:?}", report);
        for point in points {
            let mut expected: Vec<_> = (1_i64..).zip(&model).filter(|(_, (p, _))| *p == point).map(|(seq, (_, r))| (seq, *r)).collect();
            expected.sort_by_key(|(seq, r)| (r.at, *seq));
            prop_assert_eq!(all(&f.path, point), expected.clone());
            for t in [0, 17, 36, 200, 399, 500] {
                let at = Timestamp::from_ms(t * GRID_MS);
                let newest = expected.iter().rfind(|(_, r)| r.at <= at).copied();
                prop_assert_eq!(reader.newest(point, Some(at)).unwrap(), newest);
            }
        }
    }
}

/// Imports into both; how many rows the ledger kept. The list keeps a row unless point, time and raw figures are there.
fn import(
    ledger: &mut Ledger,
    model: &mut Vec<(PointId, Reading)>,
    rows: &[(PointId, Reading)],
) -> u64 {
    let kept = ledger.import(rows, NOW).unwrap().kept;
    let mut n = 0;
    for row in rows {
        let same = |(point, there): &(PointId, Reading)| {
            *point == row.0
                && (there.at, there.mv, there.temp_c) == (row.1.at, row.1.mv, row.1.temp_c)
        };
        if !model.iter().any(same) {
            model.push(*row);
            n += 1;
        }
    }
    assert_eq!(kept, n);
    kept
}
