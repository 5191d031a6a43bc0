//! # Words that meters print beside their figures, and what they say of them

/// What a word beside a figure says.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) enum Meaning {
    /// The electrode's tension; multiplied by this it is in mV.
    Tension(f64),
    /// A temperature in °C.
    Celsius,
    /// A temperature in another unit, which a factor alone does not turn into °C.
    OtherTemperature,
    /// A pH value.
    Ph,
    /// Something of the instrument itself or a figure made of others, whatever unit it has.
    NotMeasured,
    /// Something else.
    Other,
}

/// What a unit behind a figure says (symbols of the SI, and how meters without a degree sign or a mu print them).
pub(super) fn unit(word: &str) -> Meaning {
    match word.to_lowercase().replace(['µ', 'μ'], "u").as_str() {
        "mv" => Meaning::Tension(1.0),
        "v" => Meaning::Tension(1_000.0),
        "uv" => Meaning::Tension(0.001),
        "°c" | "ºc" | "c" | "degc" | "deg_c" | "oc" | "cel" => Meaning::Celsius,
        "°f" | "ºf" | "f" | "degf" | "k" => Meaning::OtherTemperature,
        "ph" => Meaning::Ph,
        _ => Meaning::Other,
    }
}

/// What a name before a figure or above its column says.
pub(super) fn name(word: &str) -> Meaning {
    let word = word.to_lowercase();
    let instrument = [
        "bat", "sup", "vcc", "vdd", "ref", "off", "slope", "cal", "min", "max", "avg", "mean",
        "set", "alarm", "limit", "low", "high", "amb", "air", "board", "case", "cpu", "std",
        "gain", "iso",
    ];
    if instrument.iter().any(|of| word.starts_with(of)) {
        return Meaning::NotMeasured;
    }
    match word.trim_matches('_') {
        "mv" | "orp" | "redox" | "rx" | "emf" | "e" | "u" | "pot" | "potential" => {
            Meaning::Tension(1.0)
        }
        "t" | "temp" | "tmp" | "temperature" | "temp_c" | "atc" | "°c" | "degc" => {
            Meaning::Celsius
        }
        "ph" => Meaning::Ph,
        other => match unit(other) {
            Meaning::Tension(scale) if other != "v" => Meaning::Tension(scale),
            Meaning::OtherTemperature => Meaning::OtherTemperature,
            _ => Meaning::Other,
        },
    }
}
