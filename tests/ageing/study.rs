//! Coverage, accuracy and calibrate-by on simulated electrodes with known truth.

use halfcell::electrode::ageing::{
    Demands, Draws, Observation, Prior, Segment, Track, calibrate_by, observe, u_of_value,
};
use halfcell::electrode::convert::{Inputs, to_ph};
use halfcell::electrode::fit::{Limits, fit};
use halfcell::electrode::history::{
    Calibration, Dated, ElectrodeLine, EventId, ProbeHistory, ProbeKind, ProbeSpec, Service, Stage,
    Verdict, Verification,
};
use halfcell::electrode::orp::ReferenceElectrode;
use halfcell::electrode::units::{Celsius, Millivolts, Timestamp};
use halfcell::simulation::ageing::{Ageing, Life};

const TEMP_C: f64 = 18.0;
const N_DAYS: usize = 330;
const INPUTS: Inputs = Inputs {
    u_mv: 0.2,
    u_temp_c: 0.2,
    u_junction: 0.01,
};

fn at(days: f64) -> Timestamp {
    #[expect(clippy::cast_possible_truncation, reason = "days of a life in ms")]
    Timestamp::from_ms((days * 86_400_000.0) as i64)
}

fn dated<T>(id: EventId, days: f64, fact: T) -> Dated<T> {
    Dated {
        id,
        at: at(days),
        entered: at(days),
        by: "study".into(),
        fact,
    }
}

/// One electrode calibrated about every month, with a buffer check between in some of the months.
struct Kept {
    life: Life,
    history: ProbeHistory,
    seed: u64,
}

fn keep(way: Ageing, seed: u64, checks: f64) -> Kept {
    let mut draws = Draws::new(seed ^ 0xA5A5);
    let mut visits = vec![0.5];
    while visits[visits.len() - 1] < f64::from(330 - 20) {
        visits.push(
            visits[visits.len() - 1]
                + (30.0 + 4.0 * (draws.uniform() - 0.5) * 2.0)
                    * std::env::var("INTERVAL").map_or(1.0, |w| w.parse::<f64>().unwrap()),
        );
    }
    visits.retain(|v| *v < f64::from(330));
    let life = Life::new(way, seed, N_DAYS + 400, &visits);
    let mut history = ProbeHistory {
        spec: ProbeSpec {
            id: "P-1".into(),
            kind: ProbeKind::Ph,
            reference: ReferenceElectrode::AgCl3M,
            ph_iso: 7.0,
            serial: None,
        },
        added: at(0.0),
        moves: Vec::new(),
        calibrations: Vec::new(),
        struck: Vec::new(),
        verifications: Vec::new(),
        services: Vec::new(),
        confirmed: Vec::new(),
    };
    if way == Ageing::SawTooth {
        for (n, visit) in visits.iter().enumerate() {
            history.services.push(dated(
                10_000 + i64::try_from(n).unwrap(),
                visit - 0.01,
                Service::Cleaned,
            ));
        }
    }
    let mut before: Option<ElectrodeLine> = None;
    for (n, visit) in visits.iter().enumerate() {
        let id = 2 * i64::try_from(n).unwrap() + 1;
        let readings = life.bench(*visit, &[4.0, 7.0], &mut draws);
        let fitted = fit(&readings, 7.0, before.as_ref(), &Limits::default()).unwrap();
        if fitted.verdict != Verdict::Rejected {
            before = Some(fitted.line);
        }
        history.calibrations.push(dated(
            id,
            *visit,
            Calibration {
                probe: "P-1".into(),
                readings,
                line: fitted.line,
                residuals_mv: fitted.residuals_mv,
                verdict: fitted.verdict,
                reasons: fitted.reasons,
                as_found_error: None,
                span: fitted.span,
                override_why: None,
            },
        ));
        if draws.uniform() < checks {
            let when = visit + 15.0;
            history.verifications.push(dated(
                id + 1,
                when,
                Verification {
                    probe: "P-1".into(),
                    stage: Stage::Check,
                    readings: life.bench(when, &[7.0], &mut draws),
                    errors: Vec::new(),
                    passed: true,
                    tolerance: 0.1,
                    reasons: Vec::new(),
                },
            ));
        }
    }
    Kept {
        life,
        history,
        seed,
    }
}

#[derive(Default)]
struct Score {
    covered: [usize; 3],
    n: [usize; 3],
    plain: usize,
    best_covered: usize,
    n_turned: usize,
    best_turned: usize,
    square_value: f64,
    square_best: f64,
    us: Vec<f64>,
    late: usize,
    inside: usize,
    forecasts: usize,
}

#[expect(clippy::cast_precision_loss, reason = "counts of a study")]
fn share(n: usize, of: usize) -> f64 {
    100.0 * n as f64 / of.max(1) as f64
}

impl Score {
    fn coverage(&self) -> f64 {
        share(self.covered.iter().sum(), self.n.iter().sum())
    }
    fn third(&self, third: usize) -> f64 {
        share(self.covered[third], self.n[third])
    }
    fn median_u(&mut self) -> f64 {
        self.us.sort_by(f64::total_cmp);
        self.us[self.us.len() / 2]
    }
    fn ratio(&self) -> f64 {
        (self.square_best / self.square_value).sqrt()
    }
    fn row(&mut self, name: &str) -> String {
        format!(
            "{name:18} {:5.1} {:5.1} {:5.1} {:5.1}  {:5.1}  {:.3}  {:.4} {:.2}  {:5.1} {:5.1}  {:5.1} {:5.1} ({})",
            self.coverage(),
            self.third(0),
            self.third(1),
            self.third(2),
            share(self.plain, self.n.iter().sum()),
            self.median_u(),
            (self.square_value / f64::from(u32::try_from(self.us.len()).unwrap())).sqrt(),
            self.ratio(),
            share(self.best_covered, self.n.iter().sum()),
            share(self.best_turned, self.n_turned),
            share(self.late, self.forecasts),
            share(self.inside, self.forecasts),
            self.forecasts,
        )
    }
    fn heading() -> &'static str {
        "way                cover   1/3   2/3   3/3  plain  med u  rms-v  b/v  best% turn%  late% in% (n)"
    }
}

fn follow<'a>(
    held: &'a mut Option<Segment>,
    t: Timestamp,
    find: impl Fn(Timestamp) -> Option<Segment>,
) -> &'a Segment {
    if held.as_ref().is_none_or(|s| !s.holds(t)) {
        *held = find(t);
    }
    held.as_ref().unwrap()
}

fn judge(kept: &Kept, prior: &Prior, tolerance: f64, score: &mut Score) {
    let observations: Vec<Observation> = observe(&kept.history, &[], at(330.0));
    let track = Track::run(&observations, prior).unwrap();
    let mut draws = Draws::new(kept.seed ^ 0x5EED);
    let t_c = Celsius::new(TEMP_C).unwrap();
    let (mut live, mut known) = (None, None);
    let mut junction = 0.0;
    let mut days = 1.0;
    while days < 330.0 {
        let t = at(days);
        let cal = kept.history.calibration_at(t).unwrap();
        let age = t.days_since(
            kept.history
                .calibrations
                .iter()
                .rev()
                .find(|c| c.at <= t)
                .unwrap()
                .at,
        );
        let third = if age < 10.0 {
            0
        } else if age < 20.0 {
            1
        } else {
            2
        };
        junction += -junction * 0.25 + 0.0066 * draws.normal();
        let truth = 7.8 + 0.5 * (std::f64::consts::TAU * days).sin() + 0.2 * (days / 20.0).sin();
        let mv = kept.life.mv(days, truth + junction, TEMP_C) + 0.2 * draws.normal();
        let mv = Millivolts::new(mv).unwrap();
        let value = to_ph(mv, t_c, &cal.fact.line, 7.0, &INPUTS).unwrap();
        let line = follow(&mut live, t, |t| track.filtered_segment(t)).line_at(t);
        let now = to_ph(mv, t_c, &line, 7.0, &INPUTS).unwrap();
        let u = u_of_value(value.value, &now);
        let line = follow(&mut known, t, |t| track.smoothed_segment(t)).line_at(t);
        let best = to_ph(mv, t_c, &line, 7.0, &INPUTS).unwrap();
        score.n[third] += 1;
        score.covered[third] += usize::from((value.value - truth).abs() <= u);
        score.plain += usize::from((value.value - truth).abs() <= value.u);
        let best_in = (best.value - truth).abs() <= best.u;
        score.best_covered += usize::from(best_in);
        if kept.life.turns_at_days > 0.0 && days > kept.life.turns_at_days {
            score.n_turned += 1;
            score.best_turned += usize::from(best_in);
        }
        score.square_value += (value.value - truth).powi(2);
        score.square_best += (best.value - truth).powi(2);
        score.us.push(u);
        days += 0.5;
    }
    if std::env::var("NOFORE").is_ok() {
        return;
    }
    for cal in kept
        .history
        .calibrations
        .iter()
        .skip(2)
        .filter(|c| c.fact.verdict != Verdict::Rejected)
    {
        forecast(kept, &track, cal, tolerance, score);
    }
}

fn forecast(
    kept: &Kept,
    track: &Track,
    cal: &Dated<Calibration>,
    tolerance: f64,
    score: &mut Score,
) {
    let line = &cal.fact.line;
    let demands = Demands {
        kind: ProbeKind::Ph,
        ph_iso: 7.0,
        tolerance,
        slope: [0.85, 1.03],
        offset_mv: 60.0,
        usual_ph: 7.8,
        usual_temp_c: TEMP_C,
        u_junction: 0.01,
    };
    let said = calibrate_by(track, (line, cal.at), &demands, cal.at).unwrap();
    let from = cal.at.days_since(at(0.0));
    let t_c = Celsius::new(TEMP_C).unwrap();
    let mut passed = None;
    let mut days = from;
    while days < f64::from(330 + 400 - 1) && passed.is_none() {
        let mv = Millivolts::new(kept.life.mv(days, 7.8, TEMP_C)).unwrap();
        let value = to_ph(mv, t_c, line, 7.0, &INPUTS).unwrap();
        if (value.value - 7.8).abs() > tolerance {
            passed = Some(at(days));
        }
        days += 0.25;
    }
    score.forecasts += 1;
    score.late += usize::from(passed.is_some_and(|p| p < said.by));
    let passed = passed.unwrap_or(at(f64::from(330 + 400)));
    score.inside += usize::from(said.earliest <= passed && passed <= said.latest);
}

#[test]
fn the_study() {
    let mut prior = Prior::of(ProbeKind::Ph);
    if let Ok(days) = std::env::var("REGIME") {
        let parts: Vec<f64> = days.split(',').map(|p| p.parse().unwrap()).collect();
        prior.temperaments[0].share = parts[0];
        prior.temperaments[1].share = 1.0 - parts[0];
        prior.temperaments[0].regime_days = parts[1];
        prior.temperaments[1].regime_days = parts[2];
    }
    if let Ok(set) = std::env::var("ONLY") {
        let set: usize = set.parse().unwrap();
        prior.noises = vec![prior.noises[set]];
        prior.shares = vec![1.0];
    }
    let n_lives: u64 = std::env::var("LIVES").map_or(30, |n| n.parse().unwrap());
    for (checks, tolerance) in [(0.0, 0.2), (0.5, 0.1)] {
        println!(
            "checks {checks} tolerance {tolerance}\n{}",
            Score::heading()
        );
        for way in Ageing::ALL {
            let mut score = Score::default();
            let lives: Vec<Kept> = (0..n_lives).map(|n| keep(way, 1000 + n, checks)).collect();
            let mut prior = prior.clone();
            if std::env::var("LEARN").is_ok() {
                let all: Vec<Vec<Observation>> = lives
                    .iter()
                    .take(8)
                    .map(|k| observe(&k.history, &[], at(330.0)))
                    .collect();
                prior = halfcell::electrode::ageing::learn(&all, &prior);
            }
            for kept in &lives {
                judge(kept, &prior, tolerance, &mut score);
            }
            println!("{}", score.row(&format!("{way:?}")));
        }
    }
}
