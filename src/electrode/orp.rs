//! # ORP: reference electrodes and check solutions by temperature

use super::named::named;

named! {
    /// The reference electrode inside a probe: silver/silver chloride or calomel, by its potassium chloride filling.
    ReferenceElectrode, "reference electrode" {
        /// Ag/AgCl, 0.1 mol/L.
        AgCl0_1M = "agcl-0.1m",
        /// Ag/AgCl, 1 mol/L.
        AgCl1M = "agcl-1m",
        /// Ag/AgCl, 3 mol/L.
        AgCl3M = "agcl-3m",
        /// Ag/AgCl, 3.3 mol/L.
        AgCl3_3M = "agcl-3.3m",
        /// Ag/AgCl, 3.5 mol/L.
        AgCl3_5M = "agcl-3.5m",
        /// Ag/AgCl, 4 mol/L.
        AgCl4M = "agcl-4m",
        /// Ag/AgCl, saturated.
        AgClSaturated = "agcl-sat",
        /// Calomel, 0.1 mol/L.
        Calomel0_1M = "calomel-0.1m",
        /// Calomel, 1 mol/L.
        Calomel1M = "calomel-1m",
        /// Calomel, 3.5 mol/L.
        Calomel3_5M = "calomel-3.5m",
        /// Calomel, saturated.
        CalomelSaturated = "calomel-sat",
    }
}

named! {
    /// A solution of known redox potential.
    CheckSolution, "check solution" {
        /// Potassium ferrocyanide and ferricyanide in potassium chloride.
        Zobell = "zobell",
        /// Ferrous and ferric ammonium sulfate in sulfuric acid.
        Light = "light",
        /// Quinhydrone in pH 4 buffer.
        Quinhydrone4 = "quinhydrone-4",
        /// Quinhydrone in pH 7 buffer.
        Quinhydrone7 = "quinhydrone-7",
    }
}
