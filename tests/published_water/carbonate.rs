//! Sources named in each row of `co2.csv`.

use crate::{assert_within, exact, figure, rows};
use halfcell::water::carbonate::free_co2_mg_l;

const TABLE: &str = include_str!("co2.csv");

/// Density of sea water at the rows' temperature and salinity, from the rows themselves: mg/L over µmol/kg.
fn density_kg_l(row: &std::collections::BTreeMap<String, String>) -> f64 {
    figure(row, "co2_mg_per_l") / (figure(row, "co2_umol_per_kg") * 44.0095e-3)
}

fn check(method: &str, scale: &str, n: usize, fraction: f64) {
    let rows = rows(TABLE);
    let of: Vec<_> = rows
        .iter()
        .filter(|r| r["method"] == method && r["ph_scale"] == scale)
        .collect();
    assert_eq!(of.len(), n, "{method}, {scale}");
    for row in of {
        let (ph, temp_c, s) = (
            figure(row, "ph"),
            figure(row, "temp_c"),
            figure(row, "salinity"),
        );
        let alkalinity = figure(row, "alkalinity_meq_per_kg") * density_kg_l(row);
        let got = free_co2_mg_l(&exact(ph, temp_c, s), (alkalinity, 0.0)).unwrap();
        assert_within(
            &row["id"],
            got.figure.value,
            figure(row, "co2_mg_per_l"),
            fraction,
        );
    }
}

#[test]
fn fresh_water_by_a_speciation_program_with_the_same_activities() {
    // Source: PHREEQC 3 through phreeqpython 1.6.2 with Davies activities and Plummer & Busenberg 1982.
    check("plummer_busenberg_davies", "activity", 24, 3e-4);
}

#[test]
fn hard_water_with_ion_pairs_is_within_what_is_stated() {
    // Source: PHREEQC 3, stock database: real ions and pairs in hard water; 5 % is stated as the method's own.
    // The salinity is what an operator would have from conductivity: that of sea water of the row's ionic strength.
    let rows = rows(TABLE);
    let rows: Vec<_> = rows
        .iter()
        .filter(|r| r["method"] == "phreeqc_stock")
        .collect();
    assert_eq!(rows.len(), 6);
    for row in rows {
        let ionic = figure(row, "ionic_strength");
        let salinity = 1_000.0 * ionic / (19.9273 + 1.005_109 * ionic);
        let liquid = exact(figure(row, "ph"), figure(row, "temp_c"), salinity);
        let alkalinity = figure(row, "alkalinity_meq_per_kg") * density_kg_l(row);
        let got = free_co2_mg_l(&liquid, (alkalinity, 0.0))
            .unwrap()
            .figure
            .value;
        assert_within(&row["id"], got, figure(row, "co2_mg_per_l"), 0.05);
    }
}

#[test]
fn sea_water_by_lueker_2000() {
    // Source: PyCO2SYS 1.8.3.4, constants of Lueker et al. 2000, pH on the NBS scale. Rows on the total scale are for other users: a
    // probe calibrated in ordinary buffers has no pH on that scale.
    check("lueker_2000", "NBS", 6, 4e-5);
}

#[test]
fn brackish_water_by_millero_2010() {
    // Source: PyCO2SYS 1.8.3.4, constants of Millero 2010, pH on the NBS scale.
    let rows = rows(TABLE);
    let rows: Vec<_> = rows
        .iter()
        .filter(|r| r["method"] == "millero_2010" && r["ph_scale"] == "NBS")
        .collect();
    assert_eq!(rows.len(), 5);
    for row in rows {
        let (ph, temp_c, s) = (
            figure(row, "ph"),
            figure(row, "temp_c"),
            figure(row, "salinity"),
        );
        let alkalinity = figure(row, "alkalinity_meq_per_kg") * density_kg_l(row);
        let got = free_co2_mg_l(&exact(ph, temp_c, s), (alkalinity, 0.0)).unwrap();
        // From salinity 19 on the program takes Lueker's constants, which part from Millero's by up to 2 %.
        let fraction = if s >= 19.0 { 0.02 } else { 4e-5 };
        assert_within(
            &row["id"],
            got.figure.value,
            figure(row, "co2_mg_per_l"),
            fraction,
        );
    }
}

#[test]
fn fresh_and_sea_water_ways_meet_at_salinity_5() {
    // Source: the project's reference sheet: 126.5 and 127.7 µmol/kg at 15 °C, pH 7.5, computed with both libraries.
    let below = free_co2_mg_l(&exact(7.5, 15.0, 4.99), (2.0, 0.0)).unwrap();
    let above = free_co2_mg_l(&exact(7.5, 15.0, 5.0), (2.0, 0.0)).unwrap();
    assert_within(
        "at salinity 5",
        below.figure.value,
        above.figure.value,
        0.02,
    );
}
