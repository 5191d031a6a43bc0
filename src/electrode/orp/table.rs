//! # Reference electrodes by temperature
//!
//! Rows are temperature in °C, potential against the standard hydrogen electrode in mV, standard uncertainty (k = 1) in mV.
//! The potentials include the liquid junction against dilute buffer, as a probe in water sees it.
//!
//! Sources of the rows between 10 °C and 40 °C:
//! - silver 3.5 mol/L and saturated, all calomel: Sawyer, Sobkowiak & Roberts, Electrochemistry for Chemists, 2nd ed. (1995), as tabulated
//!   in an open data set;
//! - silver 3 and 3.3 mol/L: USGS National Field Manual, chapter A6.5 (from memory); the 3 mol/L figure differs by 2 mV from the
//!   ISO 11271 family, hence u = 2 mV;
//! - silver 1 mol/L, 0–50 °C: ISO 11271:2002, Annex C (from memory), ±1 mV.
//!
//! Rows outside (silver only) are computed: the value at 25 °C plus the change of `E0(T) − (RT/F)·ln a(KCl)`, E0 by Bates & Bower,
//! J. Res. NBS 53 (1954) 283, activities by a Pitzer model; u is 2 mV greater at 0–10 °C and 40–60 °C and 4 mV greater above (ours).
//! u within 10–40 °C is ours: rounding (0.3 mV) with what the published families part by (1 to 3 mV).

use super::super::standard::Row;

pub(super) const AGCL_1M: &[Row] = &[
    Row(0.0, 249.0, 1.0),
    Row(5.0, 247.0, 1.0),
    Row(10.0, 244.0, 1.0),
    Row(15.0, 242.0, 1.0),
    Row(20.0, 239.0, 1.0),
    Row(25.0, 236.0, 1.0),
    Row(30.0, 233.0, 1.0),
    Row(35.0, 230.0, 1.0),
    Row(40.0, 227.0, 1.0),
    Row(45.0, 224.0, 1.0),
    Row(50.0, 221.0, 1.0),
    Row(60.0, 211.5, 3.0),
    Row(70.0, 203.6, 5.0),
    Row(80.0, 195.3, 5.0),
];
pub(super) const AGCL_3M: &[Row] = &[
    Row(0.0, 226.4, 4.0),
    Row(5.0, 223.1, 4.0),
    Row(10.0, 220.0, 2.0),
    Row(15.0, 216.0, 2.0),
    Row(20.0, 213.0, 2.0),
    Row(25.0, 209.0, 2.0),
    Row(30.0, 205.0, 2.0),
    Row(35.0, 202.0, 2.0),
    Row(40.0, 198.0, 2.0),
    Row(45.0, 193.2, 4.0),
    Row(50.0, 189.0, 4.0),
    Row(60.0, 180.4, 4.0),
    Row(70.0, 171.4, 6.0),
    Row(80.0, 162.2, 6.0),
];
pub(super) const AGCL_3_3M: &[Row] = &[
    Row(0.0, 224.7, 4.0),
    Row(5.0, 221.4, 4.0),
    Row(10.0, 217.0, 2.0),
    Row(15.0, 214.0, 2.0),
    Row(20.0, 210.0, 2.0),
    Row(25.0, 207.0, 2.0),
    Row(30.0, 203.0, 2.0),
    Row(35.0, 199.0, 2.0),
    Row(40.0, 195.0, 2.0),
    Row(45.0, 191.0, 4.0),
    Row(50.0, 186.7, 4.0),
    Row(60.0, 178.0, 4.0),
    Row(70.0, 168.9, 6.0),
    Row(80.0, 159.6, 6.0),
];
pub(super) const AGCL_3_5M: &[Row] = &[
    Row(0.0, 222.6, 3.0),
    Row(5.0, 219.2, 3.0),
    Row(10.0, 215.0, 1.0),
    Row(15.0, 212.0, 1.0),
    Row(20.0, 208.0, 1.0),
    Row(25.0, 205.0, 1.0),
    Row(30.0, 201.0, 1.0),
    Row(35.0, 197.0, 1.0),
    Row(40.0, 193.0, 1.0),
    Row(45.0, 188.4, 3.0),
    Row(50.0, 184.1, 3.0),
    Row(60.0, 175.3, 3.0),
    Row(70.0, 166.2, 5.0),
    Row(80.0, 156.8, 5.0),
];
pub(super) const AGCL_SATURATED: &[Row] = &[
    Row(0.0, 224.6, 3.0),
    Row(5.0, 219.6, 3.0),
    Row(10.0, 214.0, 1.0),
    Row(15.0, 209.0, 1.0),
    Row(20.0, 204.0, 1.0),
    Row(25.0, 199.0, 1.0),
    Row(30.0, 194.0, 1.0),
    Row(35.0, 189.0, 1.0),
    Row(40.0, 184.0, 1.0),
    Row(45.0, 177.4, 3.0),
    Row(50.0, 171.9, 3.0),
    Row(60.0, 160.6, 3.0),
    Row(70.0, 149.2, 5.0),
    Row(80.0, 137.5, 5.0),
];
pub(super) const CALOMEL_0_1M: &[Row] = &[
    Row(10.0, 336.0, 2.0),
    Row(15.0, 336.0, 2.0),
    Row(20.0, 336.0, 2.0),
    Row(25.0, 336.0, 2.0),
    Row(30.0, 335.0, 2.0),
    Row(35.0, 334.0, 2.0),
    Row(40.0, 334.0, 2.0),
];
pub(super) const CALOMEL_1M: &[Row] = &[
    Row(10.0, 287.0, 2.0),
    Row(20.0, 284.0, 2.0),
    Row(25.0, 283.0, 2.0),
    Row(30.0, 282.0, 2.0),
    Row(40.0, 278.0, 2.0),
];
pub(super) const CALOMEL_3_5M: &[Row] = &[
    Row(10.0, 256.0, 1.0),
    Row(15.0, 254.0, 1.0),
    Row(20.0, 252.0, 1.0),
    Row(25.0, 250.0, 1.0),
    Row(30.0, 248.0, 1.0),
    Row(35.0, 246.0, 1.0),
    Row(40.0, 244.0, 1.0),
];
pub(super) const CALOMEL_SATURATED: &[Row] = &[
    Row(10.0, 254.0, 1.0),
    Row(15.0, 251.0, 1.0),
    Row(20.0, 248.0, 1.0),
    Row(25.0, 244.0, 1.0),
    Row(30.0, 241.0, 1.0),
    Row(35.0, 238.0, 1.0),
    Row(40.0, 234.0, 1.0),
];
