//! # Every key of the configuration, as data: adding one is one line here, then a check that reads it

use super::site::Protocol;

/// The keys of one kind of table.
#[derive(Debug)]
pub(super) struct Keys {
    /// As it stands in the file.
    pub(super) table: &'static str,
    /// Each key with a value as example.
    pub(super) known: &'static [(&'static str, &'static str)],
}

impl Keys {
    /// An example value of a key.
    pub(super) fn example(&self, key: &str) -> &'static str {
        self.known
            .iter()
            .find(|(known, _)| *known == key)
            .map_or("…", |(_, example)| example)
    }
}

pub(super) const ROOT: Keys = Keys {
    table: "the file",
    known: &[
        ("site", "[site]"),
        ("line", "[[line]]"),
        ("meter", "[[meter]]"),
        ("point", "[[point]]"),
    ],
};

pub(super) const SITE: Keys = Keys {
    table: "[site]",
    known: &[
        ("name", "\"Sable Creek Hatchery\""),
        ("timezone", "\"America/Halifax\""),
        ("ledger", "\"/var/lib/halfcell/site.db\""),
        ("commit_window", "\"1s\""),
    ],
};

pub(super) const LINE: Keys = Keys {
    table: "[[line]]",
    known: &[
        ("name", "\"raceway-bus\""),
        ("device", "\"/dev/ttyUSB0\""),
        ("baud", "9600"),
        ("data_bits", "8"),
        ("parity", "\"none\""),
        ("stop_bits", "1"),
        ("protocol", "\"modbus-rtu\""),
    ],
};

pub(super) const DEVICE: Keys = Keys {
    table: "device",
    known: &[("usb_serial", "\"A10K7\"")],
};

pub(super) const METER: Keys = Keys {
    table: "[[meter]]",
    known: &[
        ("name", "\"raceway-1\""),
        ("line", "\"raceway-bus\""),
        ("unit", "11"),
        ("every", "\"1s\""),
        ("timeout", "\"500ms\""),
        ("ask", "\"READ?\\r\\n\""),
        ("pattern", "'(?<mv>[-+]?\\d+[.,]\\d+)\\s*mV'"),
        ("terminator", "\"\\r\\n\""),
        ("checksum", "\"xor\""),
        ("over_range", "[\"----\", \"OL\"]"),
        ("signals", "{ mv = … }"),
    ],
};

/// Keys of a meter that only some protocols have.
pub(super) const METER_KEYS_OF: &[(&str, &[Protocol])] = &[
    ("unit", &[Protocol::ModbusRtu]),
    ("every", &[Protocol::ModbusRtu, Protocol::Query]),
    ("timeout", &[Protocol::ModbusRtu, Protocol::Query]),
    ("ask", &[Protocol::Query]),
    ("pattern", &[Protocol::Stream, Protocol::Query]),
    ("terminator", &[Protocol::Stream, Protocol::Query]),
    ("checksum", &[Protocol::Stream, Protocol::Query]),
    ("over_range", &[Protocol::Stream, Protocol::Query]),
];

pub(super) const SIGNAL: Keys = Keys {
    table: "a signal",
    known: &[
        ("register", "0"),
        ("table", "\"input\""),
        ("type", "\"i16\""),
        ("word_order", "\"big\""),
        ("scale", "0.1"),
    ],
};

pub(super) const POINT: Keys = Keys {
    table: "[[point]]",
    known: &[
        ("tag", "\"POND-3\""),
        ("quantity", "\"ph\""),
        ("signal", "\"pond-3.mv\""),
        ("temperature", "\"pond-3.temp_c\""),
        ("temperature_u", "0.2"),
        ("every", "\"1s\""),
        ("tolerance", "0.10"),
        ("junction", "0.01"),
        ("alarm", "{ low = 6.8, high = 8.6 }"),
        ("redundant_with", "[\"POND-3B\"]"),
        ("water", "{ salinity = 0.0 }"),
        ("effluent", "{ low = 6.0, high = 9.0 }"),
    ],
};

pub(super) const TEMPERATURE: Keys = Keys {
    table: "temperature",
    known: &[
        ("fixed", "25.0"),
        ("signal", "\"pond-3.temp_c\""),
        ("ohms", "\"pond-3.ohms\""),
        ("sensor", "\"pt1000\""),
        ("fallback", "20.0"),
    ],
};

pub(super) const ALARM: Keys = Keys {
    table: "alarm",
    known: &[
        ("low_low", "6.5"),
        ("low", "6.8"),
        ("high", "8.6"),
        ("high_high", "9.0"),
        ("deadband", "0.1"),
        ("on_delay", "\"60s\""),
        ("off_delay", "\"120s\""),
    ],
};

pub(super) const WATER: Keys = Keys {
    table: "water",
    known: &[
        ("salinity", "0.0"),
        ("alkalinity_meq_l", "1.8"),
        ("total_ammonia_mg_l", "0.6"),
    ],
};

pub(super) const EFFLUENT: Keys = Keys {
    table: "effluent",
    known: &[
        ("low", "6.0"),
        ("high", "9.0"),
        ("total_minutes", "446"),
        ("single_minutes", "60"),
        ("sides", "\"both\""),
        ("flow", "\"weir.flow\""),
        ("flow_above", "0.0"),
    ],
};
