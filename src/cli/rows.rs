//! # The rows of an import file: each becomes a sample or a reason with its line number
//!
//! in: CSV text, one row per line. out: per row the point, the time and the figures, or why it is broken.
//! Always: a broken row takes no other row with it, so quotes never join lines.

use super::failure::Failure;
use crate::config::site::Site;
use crate::config::time::{epoch_or_rfc3339, rfc3339_ms};
use crate::electrode::units::{Celsius, Millivolts, Timestamp};
use std::collections::HashMap;
use std::io::BufRead;

/// Later than this after the present moment, a time is a slip: a day is left for clocks and zones.
const AHEAD_MS: i64 = 86_400_000;
/// 1990-01-01T00:00:00Z: earlier, the file most likely gives seconds where milliseconds belong.
const EARLIEST_MS: i64 = 631_152_000_000;

/// A good row.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Row {
    /// Index into the site's points.
    pub(super) point: usize,
    /// When.
    pub(super) at: Timestamp,
    /// Raw potential, mV.
    pub(super) mv: f64,
    /// Temperature, °C.
    pub(super) temp_c: Option<f64>,
}

/// A row that cannot be read.
#[derive(Debug, Clone, PartialEq, Eq, serde::Serialize)]
pub(super) struct Broken {
    /// Its line in the file, from 1.
    pub(super) line: u64,
    /// Why.
    pub(super) why: String,
}

/// Where the four columns stand.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
struct Columns {
    time: usize,
    point: usize,
    mv: usize,
    temp_c: usize,
}

/// Reads rows one by one. A row is a line, quotes or not, so that a stray quote cannot swallow its neighbours.
#[derive(Debug)]
pub(super) struct Rows<'a, R> {
    reader: R,
    /// The present line, without its end.
    text: Vec<u8>,
    line: u64,
    bytes: u64,
    columns: Columns,
    width: usize,
    points: HashMap<&'a [u8], usize>,
    now: Timestamp,
    /// Columns of the file that are not read.
    pub(super) unread: Vec<String>,
}

impl<'a, R: BufRead> Rows<'a, R> {
    /// Takes up a file by its header.
    pub(super) fn new(reader: R, site: &'a Site, now: Timestamp) -> Result<Self, Failure> {
        let points = site
            .points
            .iter()
            .enumerate()
            .map(|(place, point)| (point.tag.0.as_bytes(), place))
            .collect();
        let mut rows = Self {
            reader,
            text: Vec::new(),
            line: 0,
            bytes: 0,
            columns: Columns::default(),
            width: 0,
            points,
            now,
            unread: Vec::new(),
        };
        rows.advance()?;
        let header = rows
            .text
            .strip_prefix("\u{feff}".as_bytes())
            .unwrap_or(&rows.text);
        let names: Vec<String> = header
            .split(|byte| *byte == b',')
            .map(|name| String::from_utf8_lossy(bare(name)).into_owned())
            .collect();
        rows.columns = columns(&names)?;
        rows.width = names.len();
        let Columns {
            time,
            point,
            mv,
            temp_c,
        } = rows.columns;
        rows.unread = names
            .into_iter()
            .enumerate()
            .filter(|(place, _)| ![time, point, mv, temp_c].contains(place))
            .map(|(_, name)| name)
            .collect();
        Ok(rows)
    }

    /// The next row that is not empty; `None` at the end.
    pub(super) fn next(&mut self) -> Result<Option<Result<Row, Broken>>, Failure> {
        while self.advance()? {
            if !self.text.trim_ascii().is_empty() {
                let line = self.line;
                return Ok(Some(self.row().map_err(|why| Broken { line, why })));
            }
        }
        Ok(None)
    }

    /// Bytes read so far, for the progress bar.
    pub(super) const fn bytes(&self) -> u64 {
        self.bytes
    }

    /// Takes up the next line; says whether there was one.
    fn advance(&mut self) -> Result<bool, Failure> {
        self.text.clear();
        let n = self
            .reader
            .read_until(b'\n', &mut self.text)
            .map_err(|error| {
                Failure::world(format!("cannot read the file: {error}"))
                    .at(format!("line {}", self.line + 1))
            })?;
        self.line += 1;
        self.bytes += n as u64;
        Ok(n > 0)
    }

    fn row(&self) -> Result<Row, String> {
        let mut fields = [&[][..]; 4];
        let mut n = 0;
        let Columns {
            time,
            point,
            mv,
            temp_c,
        } = self.columns;
        for field in self.text.split(|byte| *byte == b',') {
            for (kept, place) in fields.iter_mut().zip([time, point, mv, temp_c]) {
                if place == n {
                    *kept = bare(field);
                }
            }
            n += 1;
        }
        if n != self.width {
            return Err(format!("{n} fields where the header has {}", self.width));
        }
        let [time, tag, mv, temp_c] = fields;
        let Some(&point) = self.points.get(tag) else {
            return Err(format!("unknown point `{}`", shown(tag)));
        };
        let at = self.time(time)?;
        let mv = number(mv, "mv")?.ok_or("mv is empty")?;
        Millivolts::new(mv).map_err(|error| error.to_string())?;
        let temp_c = number(temp_c, "temp_c")?;
        if let Some(c) = temp_c {
            Celsius::new(c).map_err(|error| error.to_string())?;
        }
        Ok(Row {
            point,
            at,
            mv,
            temp_c,
        })
    }

    fn time(&self, field: &[u8]) -> Result<Timestamp, String> {
        let text =
            std::str::from_utf8(field).map_err(|_| format!("`{}` is no time", shown(field)))?;
        let at = epoch_or_rfc3339(text).map_err(|error| error.to_string())?;
        if at > self.now.plus_ms(AHEAD_MS) {
            return Err(format!("`{text}` lies in the future"));
        }
        if at.ms() < EARLIEST_MS {
            return Err(format!(
                "`{text}` is {}, before 1990; write milliseconds, not seconds, since 1970",
                rfc3339_ms(at)
            ));
        }
        Ok(at)
    }
}

/// A field without spaces and without the quotes around it.
fn bare(field: &[u8]) -> &[u8] {
    let field = field.trim_ascii();
    match field {
        [b'"', inner @ .., b'"'] => inner,
        _ => field,
    }
}

/// Broken text as it may be shown: one line, not endless.
fn shown(field: &[u8]) -> String {
    String::from_utf8_lossy(field)
        .chars()
        .take(40)
        .map(|c| if c.is_control() { '\u{fffd}' } else { c })
        .collect()
}

fn number(field: &[u8], column: &str) -> Result<Option<f64>, String> {
    if field.is_empty() {
        return Ok(None);
    }
    std::str::from_utf8(field)
        .ok()
        .and_then(|text| text.parse::<f64>().ok())
        .filter(|figure| figure.is_finite())
        .map(Some)
        .ok_or_else(|| format!("{column} `{}` is no figure", shown(field)))
}

fn columns(names: &[String]) -> Result<Columns, Failure> {
    let wrong = |what: String| {
        Failure::request(what)
            .at(format!("header `{}`", names.join(",")))
            .remedy(
                "write a first line `time,point,mv,temp_c`, columns in any order, commas between",
            )
    };
    let place = |wanted: &str| {
        let mut found = names.iter().enumerate().filter(|(_, name)| *name == wanted);
        match (found.next(), found.next()) {
            (Some((place, _)), None) => Ok(place),
            (Some(_), Some(_)) => Err(wrong(format!("column `{wanted}` is there twice"))),
            (None, _) => Err(wrong(format!("column `{wanted}` is missing"))),
        }
    };
    Ok(Columns {
        time: place("time")?,
        point: place("point")?,
        mv: place("mv")?,
        temp_c: place("temp_c")?,
    })
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::config;

    const NOW: Timestamp = Timestamp::from_ms(1_772_500_000_000);

    fn site() -> Site {
        config::load(include_str!("../../tests/cli/site.toml")).unwrap()
    }

    /// The rows of a file: `point@time mv temp` or the broken line with its reason.
    fn said(text: &[u8]) -> Vec<String> {
        let site = site();
        let mut rows = Rows::new(text, &site, NOW).unwrap();
        let mut said = Vec::new();
        while let Some(row) = rows.next().unwrap() {
            said.push(match row {
                Ok(row) => format!(
                    "{}@{} {} {:?}",
                    site.points[row.point].tag,
                    row.at.ms(),
                    row.mv,
                    row.temp_c
                ),
                Err(broken) => format!("line {}: {}", broken.line, broken.why),
            });
        }
        said
    }

    #[test]
    fn columns_may_stand_in_any_order_with_others_between() {
        let text = b"note,temp_c,mv,point,time\nx,18.5,-1.25,POND-3,1772400000000\n";
        assert_eq!(said(text), ["POND-3@1772400000000 -1.25 Some(18.5)"]);
        let site = site();
        assert_eq!(Rows::new(&text[..], &site, NOW).unwrap().unread, ["note"]);
    }

    #[test]
    fn times_are_rfc_3339_or_milliseconds_and_the_temperature_may_be_empty() {
        let text = b"time,point,mv,temp_c\r\n2026-03-01T21:20:00Z,POND-3,1.5,\r\n1772400000000,BASIN,650,20\r\n";
        assert_eq!(
            said(text),
            [
                "POND-3@1772400000000 1.5 None",
                "BASIN@1772400000000 650 Some(20.0)"
            ]
        );
    }

    #[test]
    fn quotes_spaces_and_a_byte_order_mark_are_taken_off() {
        let text = "\u{feff}\"time\",point,mv,temp_c\n 1772400000000 ,\"POND-3\", 1.5 ,\"20\"\n"
            .as_bytes();
        assert_eq!(said(text), ["POND-3@1772400000000 1.5 Some(20.0)"]);
    }

    #[test]
    fn each_broken_row_is_named_by_its_line_and_takes_no_other_with_it() {
        let text = b"time,point,mv,temp_c\n\
            1772400000000,POND-3,1.5,20\n\
            1772400001000,POND-9,1.5,20\n\
            \n\
            yesterday,POND-3,1.5,20\n\
            1772400002000,POND-3,,20\n\
            1772400003000,POND-3,1,5,20,5\n\
            1772400004000,\"POND-3,1.5,20\n\
            1772400005000,POND-3,NaN,20\n\
            1772400006000,POND-3,1.5,warm\n\
            1782400000000,POND-3,1.5,20\n\
            1772400000,POND-3,1.5,20\n\
            1772400007000,POND-\xb3,1.5,20\n\
            1772400008000,POND-3,1.5,-300\n\
            1772400009000,POND-3,1.5,20\n\
            1772400010000,POND-3,1";
        assert_eq!(
            said(text),
            [
                "POND-3@1772400000000 1.5 Some(20.0)",
                "line 3: unknown point `POND-9`",
                "line 5: `yesterday` is no time; write `2026-03-02T09:14:00Z` or milliseconds since 1970",
                "line 6: mv is empty",
                "line 7: 6 fields where the header has 4",
                "line 8: unknown point `\"POND-3`",
                "line 9: mv `NaN` is no figure",
                "line 10: temp_c `warm` is no figure",
                "line 11: `1782400000000` lies in the future",
                "line 12: `1772400000` is 1970-01-21T12:20:00.000Z, before 1990; write milliseconds, not seconds, since 1970",
                "line 13: unknown point `POND-\u{fffd}`",
                "line 14: -300 °C is outside -273.15 to 2000 °C",
                "POND-3@1772400009000 1.5 Some(20.0)",
                "line 16: 3 fields where the header has 4",
            ]
        );
    }

    #[test]
    fn a_time_less_than_a_day_ahead_is_a_clock_and_not_a_slip() {
        let ahead = NOW.ms() + AHEAD_MS;
        let text = format!(
            "time,point,mv,temp_c\n{ahead},POND-3,1,20\n{},POND-3,1,20\n",
            ahead + 1
        );
        let said = said(text.as_bytes());
        assert!(said[0].starts_with("POND-3@"), "{}", said[0]);
        assert_eq!(
            said[1],
            format!("line 3: `{}` lies in the future", ahead + 1)
        );
    }

    #[test]
    fn a_header_without_the_columns_is_refused_with_the_header_to_write() {
        let site = site();
        for (header, what) in [
            ("time;point;mv;temp_c\n", "column `time` is missing"),
            ("time,point,mv\n", "column `temp_c` is missing"),
            ("time,point,mv,temp_c,mv\n", "column `mv` is there twice"),
            ("", "column `time` is missing"),
        ] {
            let refused = Rows::new(header.as_bytes(), &site, NOW).err().unwrap();
            assert!(
                refused.to_string().starts_with(what),
                "{header:?}: {refused}"
            );
        }
    }
}
