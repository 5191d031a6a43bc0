//! # What is derived from pH where the configuration says what water it is

use super::figures;
use crate::config::site::{Point, Water};
use crate::electrode::convert::Converted;
use crate::electrode::units::Celsius;
use crate::watch::flags::Flag;
use crate::watch::reading::Reading;
use crate::water::ammonia::unionized_ammonia_n_mg_l;
use crate::water::carbonate::free_co2_mg_l;
use crate::water::{Derived, Liquid, NotValid};
use serde_json::{Value, json};

/// Standard uncertainty of a configured alkalinity or total ammonia, of its value: a field kit's, and it is not of today (ours).
const U_CONFIGURED: f64 = 0.1;

/// One derived figure, mg/L.
#[derive(Debug)]
pub(super) struct Figure {
    /// As JSON names it.
    pub(super) key: &'static str,
    /// As people read it.
    name: &'static str,
    made: Result<Derived, NotValid>,
    salinity_g_kg: f64,
    flag: Flag,
}

/// Everything that can be derived from a reading of `point`; nothing where the pH has failed.
pub(super) fn figures_of(point: &Point, reading: &Reading) -> Vec<Figure> {
    let Some((water, liquid)) = point.water.as_ref().zip(liquid(point, reading)) else {
        return Vec::new();
    };
    let of = |key, name, made| Figure {
        key,
        name,
        made,
        salinity_g_kg: water.salinity,
        flag: reading.flag,
    };
    let ammonia = water.total_ammonia_mg_l.map(|total| {
        let made = unionized_ammonia_n_mg_l(&liquid, (total, U_CONFIGURED * total));
        of("nh3_n_mg_l", "NH3-N", made)
    });
    let carbon_dioxide = water.alkalinity_meq_l.map(|alkalinity| {
        let made = free_co2_mg_l(&liquid, (alkalinity, U_CONFIGURED * alkalinity));
        of("co2_mg_l", "free CO2", made)
    });
    ammonia.into_iter().chain(carbon_dioxide).collect()
}

fn liquid(point: &Point, reading: &Reading) -> Option<Liquid> {
    let Water { salinity, .. } = point.water?;
    if matches!(reading.flag, Flag::Fail | Flag::Missing) {
        return None;
    }
    Some(Liquid {
        ph: Converted {
            value: reading.value?,
            u: reading.u?,
        },
        temp: Celsius::new(reading.temp_c?).ok()?,
        u_temp_c: point.u_temp_c,
        salinity_g_kg: salinity,
    })
}

impl Figure {
    /// `POND-1: NH3-N 0.012 ± 0.003 mg/L (Emerson 1975, S 0)`; a suspect pH gives a suspect figure.
    pub(super) fn line(&self, point: &Point) -> String {
        let (tag, name, s) = (&point.tag, self.name, self.salinity_g_kg);
        let trust = match self.flag {
            Flag::Pass => String::new(),
            flag => format!("{flag}, "),
        };
        match &self.made {
            Ok(Derived { figure, method }) => {
                let figure = figures::with_u(figure.value, figure.u, "mg/L");
                format!("{tag}: {name} {figure} ({trust}{method}, S {s})\n")
            }
            Err(not_valid) => format!("{tag}: no {name}: {not_valid}\n"),
        }
    }

    /// Value and u for JSON; `null` outside the method's validity.
    pub(super) fn object(&self) -> Value {
        match &self.made {
            Ok(Derived { figure, method }) => {
                json!({ "value": figure.value, "u": figure.u, "method": method })
            }
            Err(_) => Value::Null,
        }
    }
}
