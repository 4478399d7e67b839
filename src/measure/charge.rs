//! What charge becomes as metal (Faraday's laws), and what an overpotential could press with.
//! Sources: the Faraday constant is exact by the 2019 definition of the SI (F = e·N_A); molar masses: IUPAC abridged
//! standard atomic weights 2021; densities at 20 °C: CRC Handbook of Chemistry and Physics (from memory).
//! Limits: one electron an atom; all charge is taken to deposit metal, so that volumes are upper bounds.

/// Faraday constant, C/mol (exact, SI 2019).
pub const FARADAY_C_PER_MOL: f64 = 1.602_176_634e-19 * 6.022_140_76e23;

/// Coulombs in a milliampere-hour (exact).
pub const C_PER_MAH: f64 = 3.6;

/// A metal that plates with one electron an atom.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Metal {
    /// Chemical symbol.
    pub symbol: &'static str,
    /// Molar mass, g/mol.
    pub g_per_mol: f64,
    /// Density at 20 °C, g/cm³.
    pub g_per_cm3: f64,
}

/// Metals known by their symbol.
pub const METALS: [Metal; 3] = [
    Metal { symbol: "Li", g_per_mol: 6.94, g_per_cm3: 0.534 },
    Metal { symbol: "Na", g_per_mol: 22.990, g_per_cm3: 0.968 },
    Metal { symbol: "K", g_per_mol: 39.098, g_per_cm3: 0.862 },
];

impl Metal {
    /// The metal of a symbol; none for one that is not known.
    ///
    /// ```
    /// use veerlog::measure::Metal;
    /// let thickness = Metal::of("Li").map(|metal| metal.thickness_um(1.0));
    /// assert!((thickness.unwrap() - 4.849081).abs() < 1e-6);
    /// assert_eq!(Metal::of("Xx"), None);
    /// ```
    #[must_use]
    pub fn of(symbol: &str) -> Option<Self> {
        METALS.into_iter().find(|metal| metal.symbol == symbol)
    }

    /// Molar volume, cm³/mol.
    #[must_use]
    pub fn molar_volume_cm3(&self) -> f64 {
        self.g_per_mol / self.g_per_cm3
    }

    /// Mass that a charge deposits, mg.
    #[must_use]
    pub fn mass_mg(&self, charge_mah: f64) -> f64 {
        charge_mah * C_PER_MAH / FARADAY_C_PER_MOL * self.g_per_mol * 1e3
    }

    /// Volume that a charge deposits, µm³.
    #[must_use]
    pub fn volume_um3(&self, charge_mah: f64) -> f64 {
        /// Cubic micrometres in a cubic centimetre.
        const UM3_PER_CM3: f64 = 1e12;
        self.mass_mg(charge_mah) * 1e-3 / self.g_per_cm3 * UM3_PER_CM3
    }

    /// Thickness of an even layer, µm, for a charge density in mAh/cm².
    #[must_use]
    pub fn thickness_um(&self, mah_per_cm2: f64) -> f64 {
        /// Square micrometres in a square centimetre.
        const UM2_PER_CM2: f64 = 1e8;
        self.volume_um3(mah_per_cm2) / UM2_PER_CM2
    }

    /// Specific capacity, mAh/g.
    #[must_use]
    pub fn capacity_mah_per_g(&self) -> f64 {
        FARADAY_C_PER_MOL / C_PER_MAH / self.g_per_mol
    }

    /// Pressure at which a plating overpotential is balanced, MPa: F·η/V_m. An upper bound for the
    /// pressure inside a filament; a model, not a measurement.
    #[must_use]
    pub fn pressure_mpa(&self, overpotential_mv: f64) -> f64 {
        // C/mol · mV / (cm³/mol) = 1e-3 J/cm³ = 1e-3 MPa.
        FARADAY_C_PER_MOL * overpotential_mv * 1e-3 / self.molar_volume_cm3()
    }
}
