//! What must be true of every decoder for any bytes. Shared by the fuzz targets and by the replay of their corpus in `tests/lines/`.

use halfcell::config;
use halfcell::config::site::{Meter, Site, Source, Table};
use halfcell::meters::checksum::crc16_modbus;
use halfcell::meters::frame::{Answer, answer_length, find};
use halfcell::meters::listen::guess::guess;
use halfcell::meters::listen::propose::{Heading, text_meter};
use halfcell::meters::listen::rate::{Heard, heard};
use halfcell::meters::sample::Figure;
use halfcell::meters::splitter::{LONGEST, Piece, Splitter};
use halfcell::meters::text::TextDecoder;
use std::time::Instant;

/// The same bytes give the same pieces in any split, no line is longer than it may be, and nothing is said twice.
pub fn splitter(data: &[u8], now: Instant) {
    let Some((&[kind, cut], bytes)) = data.split_first_chunk::<2>() else {
        return;
    };
    let terminator = match kind % 3 {
        0 => None,
        1 => Some(b"\r\n".to_vec()),
        _ => Some(vec![3]),
    };
    let pieces = |size: usize| -> Vec<Piece> {
        let mut splitter = Splitter::new(terminator.clone());
        bytes
            .chunks(size)
            .flat_map(|chunk| splitter.push(chunk, now))
            .collect()
    };
    let whole = pieces(bytes.len().max(1));
    assert_eq!(pieces(usize::from(cut % 64) + 1), whole);
    let mut n_said = 0;
    for piece in &whole {
        let (Piece::Line(text) | Piece::TooLong(text) | Piece::Half(text)) = piece;
        n_said += text.len();
        if let Piece::Line(line) = piece {
            assert!(line.len() <= LONGEST && !line.is_empty());
        }
    }
    assert!(n_said <= bytes.len());
}

/// Meters of every text option, on a line each.
const TEXT_SITE: &str = r#"
[site]
name = "fuzz"
timezone = "UTC"
ledger = "/tmp/fuzz.db"

[[line]]
name = "a"
device = "/dev/a"
protocol = "stream"
[[line]]
name = "b"
device = "/dev/b"
protocol = "stream"
[[line]]
name = "c"
device = "/dev/c"
protocol = "stream"

[[meter]]
name = "plain"
line = "a"
pattern = '(?<mv>[-+]?\d+[.,]\d+)\s*mV\s+(?<temp_c>[-+]?\d+[.,]\d+)'
over_range = ["----", "OL"]
[[meter]]
name = "xor"
line = "b"
pattern = '^(?:(?<time>[\d:.]+)\s+)?(?<mv>[-+]?\s*[\d.,]+(?:[eE][-+]?\d+)?)'
checksum = "xor"
[[meter]]
name = "crc"
line = "c"
pattern = '(?<mv>\S+);(?<temp_c>\S+)'
checksum = "crc16-modbus"

[[point]]
tag = "P"
quantity = "orp"
signal = "plain.mv"
temperature = "plain.temp_c"
every = "1s"
tolerance = 10.0
"#;

/// The meters that [`pattern`] tries.
pub fn text_site() -> Site {
    config::load(TEXT_SITE).expect("the site is sound")
}

fn decoder(index: usize, meter: &Meter) -> TextDecoder {
    let Source::Stream { text } = &meter.source else {
        panic!("a text meter");
    };
    TextDecoder::new(index, meter, text).expect("the pattern compiles")
}

/// Every figure is finite, and none has more digits before its mark than the line.
pub fn pattern(data: &[u8], site: &Site) {
    for (index, meter) in site.meters.iter().enumerate() {
        if let Ok(sample) = decoder(index, meter).decode(data) {
            assert_eq!(sample.figures.len(), meter.signals.len());
            assert!(sample.figures.iter().any(Option::is_some));
            assert!(!data.contains(&0), "a damaged line gave a sample");
            for figure in sample.figures.into_iter().flatten() {
                assert!(
                    matches!(figure, Figure::Number(x) if x.is_finite())
                        || figure == Figure::OverRange
                );
            }
        }
    }
}

/// What is found is a frame of the wanted unit, function, length and CRC, and is the very bytes there.
pub fn modbus(data: &[u8]) {
    let Some((&[unit, count, table], heard)) = data.split_first_chunk::<3>() else {
        return;
    };
    let (unit, count) = (unit.clamp(1, 247), u16::from(count.clamp(1, 125)));
    let (table, function) = if table % 2 == 0 {
        (Table::Input, 4)
    } else {
        (Table::Holding, 3)
    };
    // With the right CRC appended, whatever stands there must be found if it is an answer.
    let mut mended = heard.to_vec();
    mended.extend(crc16_modbus(heard).to_le_bytes());
    for heard in [heard, &mended] {
        let Some((place, answer)) = find(heard, unit, table, count) else {
            continue;
        };
        let frame = &heard[place];
        let (body, crc) = frame.split_last_chunk::<2>().expect("a frame has a CRC");
        assert_eq!(crc16_modbus(body), u16::from_le_bytes(*crc));
        match answer {
            Answer::Registers(words) => {
                let mut again = vec![
                    unit,
                    function,
                    u8::try_from(2 * count).expect("two bytes each"),
                ];
                again.extend(words.iter().flat_map(|word| word.to_be_bytes()));
                assert_eq!((body, frame.len()), (&again[..], answer_length(count)));
            }
            Answer::Exception(code) => assert_eq!(body, [unit, function | 0x80, code]),
        }
    }
}

/// What is proposed is accepted, and reads the lines it was made from.
pub fn listen(data: &[u8]) {
    let Heard::Text {
        lines, terminator, ..
    } = heard(data)
    else {
        return;
    };
    let Ok(guess) = guess(&lines) else {
        return;
    };
    let heading = Heading {
        name: "line".to_owned(),
        device: config::site::Device::Path("/dev/ttyUSB0".into()),
        framing: config::site::Framing {
            baud: 9600,
            data_bits: 8,
            parity: config::site::Parity::None,
            stop_bits: 1,
        },
    };
    let block = text_meter(&heading, &guess, None, terminator.as_deref());
    let text = format!(
        "[site]\nname = \"s\"\ntimezone = \"UTC\"\nledger = \"/tmp/s.db\"\n\n{block}\n[[point]]\ntag = \"P\"\nquantity = \"orp\"\n\
         signal = \"line-meter.mv\"\ntemperature = {{ fixed = 25.0 }}\nevery = \"1s\"\ntolerance = 10.0\n"
    );
    let site = config::load(&text).unwrap_or_else(|errors| panic!("{text}\n{errors:#?}"));
    let decoder = decoder(0, &site.meters[0]);
    let n_read = lines
        .iter()
        .filter(|line| decoder.decode(line).is_ok())
        .count();
    assert!(
        2 * n_read >= lines.len(),
        "{n_read} of {} lines read:\n{text}",
        lines.len()
    );
}
