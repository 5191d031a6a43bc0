//! The ledger beside bare loops that do only the SQLite work, in one run: bytes, ratios, times.
//!
//! `cargo bench --bench ledger`; `ROWS=10000000` for the import of ten million rows (2 000 000 unless said).

#![expect(
    clippy::unwrap_used,
    clippy::disallowed_methods,
    clippy::print_stdout,
    clippy::cast_precision_loss,
    reason = "a bench measures time, prints it and may stop"
)]

use halfcell::electrode::history::{ProbeKind, Tag};
use halfcell::electrode::units::Timestamp;
use halfcell::ledger::{Ledger, PointId, Reader};
use halfcell::watch::flags::{Flag, Tests};
use halfcell::watch::reading::{Reading, TemperatureSource, round_u, round_value};
use rusqlite::{Connection, params};
use std::fmt::Write as _;
use std::hint::black_box;
use std::ops::ControlFlow;
use std::path::Path;
use std::time::Instant;

const START_MS: i64 = 1_767_225_600_000;
const NOW: Timestamp = Timestamp::from_ms(1_900_000_000_000);
const HOUR_MS: i64 = 3_600_000;

/// Invented readings: 1 Hz with 0–6 ms of jitter, mV a walk in 0.1 mV, temperature in 0.1 °C, one in 1000 flagged.
struct Walk {
    state: u64,
    mv: Vec<i32>,
    temp: Vec<i32>,
}

impl Walk {
    fn new(points: usize) -> Self {
        Self {
            state: 0x9e37_79b9_7f4a_7c15,
            mv: vec![-1_775; points],
            temp: vec![213; points],
        }
    }

    fn random(&mut self, below: u64) -> i32 {
        self.state ^= self.state << 13;
        self.state ^= self.state >> 7;
        self.state ^= self.state << 17;
        i32::try_from((self.state >> 11) % below).unwrap()
    }

    fn next(&mut self, point: usize, second: i64) -> (i64, f64, f64) {
        self.mv[point] = (self.mv[point] + self.random(3) - 1).clamp(-3_000, 3_000);
        if self.random(60) == 0 {
            self.temp[point] = (self.temp[point] + self.random(3) - 1).clamp(50, 350);
        }
        let t = START_MS + second * 1_000 + i64::from(self.random(7));
        (
            t,
            f64::from(self.mv[point]) / 10.0,
            f64::from(self.temp[point]) / 10.0,
        )
    }

    fn reading(&mut self, point: usize, second: i64) -> Reading {
        let (t, mv, temp_c) = self.next(point, second);
        let flag = if self.random(1_000) == 0 {
            Flag::Suspect
        } else {
            Flag::Pass
        };
        judged(t, mv, temp_c, flag)
    }
}

fn judged(t: i64, mv: f64, temp_c: f64, flag: Flag) -> Reading {
    let value = 7.0 - mv / (0.198_416 * (temp_c + 273.15));
    Reading {
        at: Timestamp::from_ms(t),
        mv: Some(mv),
        temp_c: Some(temp_c),
        value: Some(round_value(ProbeKind::Ph, value)),
        u: Some(round_u(0.02 + (value - 7.0).abs() / 200.0)),
        calibration: Some(12),
        flag,
        tests: Tests::NONE,
        temperature_source: TemperatureSource::Meter,
    }
}

fn points(ledger: &mut Ledger, n: usize) -> Vec<PointId> {
    (0..n)
        .map(|i| {
            let tag = Tag(format!("POND-{i}"));
            ledger.point(&tag, ProbeKind::Ph).unwrap()
        })
        .collect()
}

fn main() {
    let folder = tempfile::tempdir().unwrap();
    for n in [8, 64] {
        live(&folder.path().join(format!("live-{n}.db")), n);
    }
    year(&folder.path().join("year.db"));
    import(folder.path());
}

/// Two and a half hours of windows of one second, sealed and pruned as the daemon does.
fn live(path: &Path, n: usize) {
    let mut ledger = Ledger::open(path).unwrap();
    let points = points(&mut ledger, n);
    let mut walk = Walk::new(n);
    let (wrote, began) = (wchar(), Instant::now());
    let seconds = if n > 8 { 4_000 } else { 9_000 };
    let mut longest_seal = 0.0_f64;
    for second in 0..seconds {
        let rows: Vec<_> = (0..n)
            .map(|p| (points[p], walk.reading(p, second)))
            .collect();
        ledger.append(&rows, &[]).unwrap();
        if second % 3_600 == 120 && second > 3_600 {
            let sealing = Instant::now();
            let cut = Timestamp::from_ms(START_MS + second / 3_600 * HOUR_MS);
            ledger.seal_before(cut, NOW).unwrap();
            longest_seal = sealing.elapsed().as_secs_f64() / n as f64;
        }
    }
    let rows = seconds as f64 * n as f64;
    println!(
        "live, {n} points, window 1 s: {:.0} bytes handed to the system per reading (goal {}), {:.2} ms a commit, sealing {:.2} ms per point and hour (goal 10)",
        (wchar() - wrote) as f64 / rows,
        if n > 8 { 350 } else { 850 },
        began.elapsed().as_secs_f64() * 1e3 / seconds as f64,
        longest_seal * 1e3,
    );
}

/// A year of one point at 1 Hz.
fn year(path: &Path) {
    const SECONDS: i64 = 365 * 86_400;
    let mut ledger = Ledger::open(path).unwrap();
    let point = points(&mut ledger, 1)[0];
    let mut walk = Walk::new(1);
    let mut rows = Vec::with_capacity(100_000);
    let began = Instant::now();
    for second in 0..SECONDS {
        rows.push((point, walk.reading(0, second)));
        if rows.len() == 100_000 || second + 1 == SECONDS {
            ledger.import(&rows, NOW).unwrap();
            rows.clear();
            while ledger.prune_some(NOW).unwrap() {}
        }
    }
    ledger.seal_all(NOW).unwrap();
    while ledger.prune_some(NOW).unwrap() {}
    let size = Connection::open(path)
        .unwrap()
        .query_row(
            "SELECT (page_count - freelist_count) * page_size FROM pragma_page_count, pragma_freelist_count, pragma_page_size",
            [],
            |row| row.get::<_, i64>(0),
        )
        .unwrap();
    println!(
        "a year of one point: {:.2} bytes a reading kept, with roll-ups and chain (goal 3.3 over 8 points); written in {:.0} s",
        size as f64 / SECONDS as f64,
        began.elapsed().as_secs_f64(),
    );
    let reader = Reader::open(path).unwrap();
    let (from, to) = (
        Timestamp::from_ms(START_MS),
        Timestamp::from_ms(START_MS + SECONDS * 1_000 + 10),
    );
    let (mut n, mut sum) = (0, 0.0);
    let began = Instant::now();
    reader
        .readings(point, from, to, |_, reading| {
            n += 1;
            sum += reading.mv.unwrap_or(0.0);
            ControlFlow::Continue(())
        })
        .unwrap();
    black_box(sum);
    assert_eq!(n, SECONDS);
    println!(
        "reading it back: {:.1} M rows/s (goal 30)",
        n as f64 / began.elapsed().as_secs_f64() / 1e6
    );
    let chart = median(|| {
        black_box(reader.chart(point, from, to, 1_000).unwrap());
    });
    println!("chart of the year, 1000 buckets: {chart:.2} ms (goal 5)");
    let mut t = START_MS;
    let one = median(|| {
        t += 37 * HOUR_MS + 1_234_567;
        black_box(reader.newest(point, Some(Timestamp::from_ms(t))).unwrap());
    });
    println!("one reading out of the year: {one:.3} ms (goal 0.5)");
}

fn median(mut work: impl FnMut()) -> f64 {
    let mut times: Vec<f64> = (0..51)
        .map(|_| {
            let began = Instant::now();
            work();
            began.elapsed().as_secs_f64() * 1e3
        })
        .collect();
    times.sort_by(f64::total_cmp);
    times[25]
}

fn import(folder: &Path) {
    let n: i64 = std::env::var("ROWS").map_or(2_000_000, |rows| rows.parse().unwrap());
    let mut csv = String::from("time,point,mv,temp_c\n");
    let mut walk = Walk::new(8);
    for row in 0..n {
        let point = usize::try_from(row % 8).unwrap();
        let (t, mv, temp_c) = walk.next(point, row / 8);
        writeln!(csv, "{t},POND-{point},{mv:.1},{temp_c:.1}").unwrap();
    }
    let file = folder.join("rows.csv");
    std::fs::write(&file, csv).unwrap();
    let bare = bare_import(&file, &folder.join("bare.db"));
    let began = Instant::now();
    let mut ledger = Ledger::open(&folder.join("ours.db")).unwrap();
    let points = points(&mut ledger, 8);
    let mut rows = Vec::with_capacity(50_000);
    let mut kept = 0;
    each_row(&file, |point, t, mv, temp_c| {
        rows.push((points[point], judged(t, mv, temp_c, Flag::Pass)));
        if rows.len() == 50_000 {
            kept += ledger.import(&rows, NOW).unwrap().kept;
            rows.clear();
        }
    });
    kept += ledger.import(&rows, NOW).unwrap().kept;
    ledger.seal_all(NOW).unwrap();
    let ours = began.elapsed().as_secs_f64();
    assert_eq!(i64::try_from(kept).unwrap(), n);
    let script = script_import(&file, &folder.join("script.db"));
    println!(
        "import of {n} rows, 8 points: {:.0} k rows/s; {:.2} of the bare loop's {:.0} k (goal 0.5), {} of a plain script (goal 2); resident at most {} MB",
        n as f64 / ours / 1e3,
        bare / ours,
        n as f64 / bare / 1e3,
        script.map_or_else(
            || "? ".to_owned(),
            |script| format!("{:.1} x", script / ours)
        ),
        peak_mb(),
    );
}

fn each_row(file: &Path, mut each: impl FnMut(usize, i64, f64, f64)) {
    use std::io::{BufRead, BufReader};
    for line in BufReader::new(std::fs::File::open(file).unwrap())
        .lines()
        .skip(1)
    {
        let line = line.unwrap();
        let mut fields = line.split(',');
        let t = fields.next().unwrap().parse().unwrap();
        let point = fields.next().unwrap()[5..].parse().unwrap();
        let mv = fields.next().unwrap().parse().unwrap();
        let temp_c = fields.next().unwrap().parse().unwrap();
        each(point, t, mv, temp_c);
    }
}

/// Parse, insert in arrival order, a compressed blob per point and hour: no repeats looked for, no roll-ups, no chain.
fn bare_import(file: &Path, path: &Path) -> f64 {
    let began = Instant::now();
    let db = Connection::open(path).unwrap();
    db.execute_batch(
        "PRAGMA journal_mode=WAL; PRAGMA synchronous=FULL;
         CREATE TABLE r(seq INTEGER PRIMARY KEY, p INTEGER, t INTEGER, mv INTEGER, c INTEGER, v INTEGER, u INTEGER, cal INTEGER, f INTEGER);
         CREATE TABLE s(p INTEGER, h INTEGER, data BLOB, PRIMARY KEY(p, h)); BEGIN IMMEDIATE",
    )
    .unwrap();
    let mut open: Vec<Vec<[i64; 4]>> = vec![Vec::new(); 8];
    let mut n = 0;
    let seal = |point: usize, rows: &mut Vec<[i64; 4]>| {
        let mut plain = Vec::with_capacity(rows.len() * 16);
        for column in 0..4 {
            let mut before = 0;
            for row in rows.iter() {
                plain.extend_from_slice(&(row[column] - before).to_le_bytes()[..3]);
                before = row[column];
            }
        }
        let data = zstd::bulk::compress(&plain, 3).unwrap();
        db.prepare_cached("INSERT OR REPLACE INTO s VALUES (?, ?, ?)")
            .unwrap()
            .execute(params![
                i64::try_from(point).unwrap(),
                rows[0][0] / HOUR_MS,
                data
            ])
            .unwrap();
        rows.clear();
    };
    each_row(file, |point, t, mv, temp_c| {
        let reading = judged(t, mv, temp_c, Flag::Pass);
        let steps = |figure: f64, per_unit: f64| {
            #[expect(clippy::cast_possible_truncation, reason = "small figures")]
            let whole = (figure * per_unit).round() as i64;
            whole
        };
        let row = [
            t,
            steps(mv, 1e3),
            steps(temp_c, 1e3),
            steps(reading.value.unwrap(), 1e4),
        ];
        db.prepare_cached("INSERT INTO r VALUES (NULL, ?, ?, ?, ?, ?, ?, 12, 17)")
            .unwrap()
            .execute(params![
                i64::try_from(point).unwrap(),
                row[0],
                row[1],
                row[2],
                row[3],
                steps(reading.u.unwrap(), 1e6)
            ])
            .unwrap();
        let rows = &mut open[point];
        if rows
            .first()
            .is_some_and(|first| first[0] / HOUR_MS != t / HOUR_MS)
        {
            seal(point, rows);
        }
        rows.push(row);
        n += 1;
        if n % 20_000 == 0 {
            db.execute_batch("COMMIT; BEGIN IMMEDIATE").unwrap();
        }
    });
    for (point, rows) in open.iter_mut().enumerate() {
        seal(point, rows);
    }
    db.execute_batch("COMMIT").unwrap();
    began.elapsed().as_secs_f64()
}

const SCRIPT: &str = "
import csv, sqlite3, struct, sys, zlib
db = sqlite3.connect(sys.argv[2], isolation_level=None)
db.execute('PRAGMA journal_mode=WAL')
db.execute('CREATE TABLE r(p TEXT, t INTEGER, mv REAL, c REAL, v REAL, u REAL)')
db.execute('CREATE TABLE s(p TEXT, h INTEGER, data BLOB)')
rows, hours = [], {}
def flush():
    db.execute('BEGIN'); db.executemany('INSERT INTO r VALUES (?,?,?,?,?,?)', rows); db.execute('COMMIT'); rows.clear()
def seal(p, h, list):
    db.execute('INSERT INTO s VALUES (?,?,?)', (p, h, zlib.compress(b''.join(struct.pack('<qddd', *r) for r in list), 1)))
reader = csv.reader(open(sys.argv[1])); next(reader)
for t, p, mv, c in reader:
    t, mv, c = int(t), float(mv), float(c)
    v = 7.0 - mv / (0.198416 * (c + 273.15))
    rows.append((p, t, mv, c, v, 0.02 + abs(v - 7.0) / 200.0))
    h, list = hours.get(p, (t // 3600000, []))
    if h != t // 3600000:
        seal(p, h, list); h, list = t // 3600000, []
    list.append((t, mv, c, v)); hours[p] = (h, list)
    if len(rows) == 10000: flush()
flush()
for p, (h, list) in hours.items(): seal(p, h, list)
";

/// A plain script that parses, computes, inserts and packs the hours; none where Python is missing.
fn script_import(file: &Path, path: &Path) -> Option<f64> {
    let began = Instant::now();
    let done = std::process::Command::new("python3")
        .args([
            "-c".as_ref(),
            SCRIPT.as_ref(),
            file.as_os_str(),
            path.as_os_str(),
        ])
        .status()
        .ok()?;
    done.success().then(|| began.elapsed().as_secs_f64())
}

/// Bytes this process has handed to the system.
fn wchar() -> u64 {
    field("/proc/self/io", "wchar:")
}

fn peak_mb() -> u64 {
    field("/proc/self/status", "VmHWM:") / 1_024
}

fn field(file: &str, name: &str) -> u64 {
    let text = std::fs::read_to_string(file).unwrap_or_default();
    text.lines()
        .find_map(|line| line.strip_prefix(name))
        .and_then(|rest| rest.split_whitespace().next()?.parse().ok())
        .unwrap_or(0)
}
