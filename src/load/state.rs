//! The load of a run: log, fixture and axis in one, asked by time and place.
//! Uncertainty: first order, by moving each input by ± its standard uncertainty and adding the half
//! differences in squares (JCGM 100:2008, 5.1.2 and the note to 5.1.3); inputs count as independent.

use super::axis::AxisRule;
use super::fixture::Fixture;
use crate::run::{FixtureName, LoadLog, Manifest, ManifestError, Series};

/// The load in force at a time and place.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct LoadState {
    /// Force, N.
    pub force_n: Option<f64>,
    /// Load axis in the picture, degrees in [0, 180).
    pub direction_deg: Option<f64>,
    /// Stress along it, MPa, positive in compression.
    pub stress_mpa: Option<f64>,
    /// Standard uncertainty of the stress, MPa; absent where no uncertainty of any input was given.
    pub u_stress_mpa: Option<f64>,
}

/// The load of a run.
#[derive(Debug, Clone, PartialEq)]
pub struct Load {
    /// What was logged.
    pub log: LoadLog,
    /// How it becomes stress.
    pub fixture: Fixture,
    /// Where it points.
    pub axis: AxisRule,
    /// What looks odd about the dimensions or the log.
    pub warnings: Vec<String>,
    /// The fixture with one dimension moved up and down by its uncertainty, for each uncertain one.
    moved: Vec<[Fixture; 2]>,
    u_force_n: Option<f64>,
    u_stress_mpa: Option<f64>,
}

impl Load {
    /// Joins manifest and log.
    ///
    /// # Errors
    /// [`ManifestError`] where the fixture lacks a dimension, or the log the column that the fixture needs.
    pub fn new(manifest: &Manifest, log: LoadLog) -> Result<Self, ManifestError> {
        let fixture = Fixture::new(manifest)?;
        needs_column(manifest, &fixture, &log)?;
        let mut moved = Vec::new();
        for given in manifest.load.dimensions().into_iter().filter(|given| given.u > 0.0) {
            let at = |by: f64| {
                let load = manifest.load.nudged(given.name, by);
                Fixture::new(&Manifest { load, ..manifest.clone() })
            };
            // Next to a bound (a plate's face, 0) one of the two may not exist: the fixture itself stands in.
            moved.push([at(given.u).unwrap_or(fixture), at(-given.u).unwrap_or(fixture)]);
        }
        let mut load = Self {
            fixture,
            axis: AxisRule::new(manifest),
            warnings: Vec::new(),
            moved,
            u_force_n: manifest.load.u_force_n,
            u_stress_mpa: manifest.load.u_stress_mpa,
            log,
        };
        load.warnings = load.doubts(manifest);
        Ok(load)
    }

    /// The load in force at a time. `px`: the place, for fixtures whose axis is local; without it the mean.
    #[must_use]
    pub fn at(&self, time_s: f64, px: Option<[f64; 2]>) -> LoadState {
        let logged = self.log.at(time_s);
        let stress_mpa = self.fixture.stress_mpa(logged.force_n, logged.stress_mpa);
        LoadState {
            force_n: logged.force_n,
            direction_deg: self.axis.axis_deg(logged.direction_deg, px),
            stress_mpa,
            u_stress_mpa: stress_mpa.and_then(|_| self.u_stress(logged.force_n, logged.stress_mpa)),
        }
    }

    /// Stress of every sample of the log that gives it, (time, MPa): for plots and steps. Empty without a log.
    #[must_use]
    pub fn stress_samples(&self) -> Vec<(f64, f64)> {
        let series = if self.fixture == Fixture::Stress { &self.log.stress_mpa } else { &self.log.force_n };
        let times = series.as_ref().map_or(&[][..], |series| &series.time_s);
        let sample = |&time_s: &f64| self.at(time_s, None).stress_mpa.map(|stress| (time_s, stress));
        times.iter().filter_map(sample).collect()
    }

    /// A warning where the stress varies by more than 5 % over the view (a bound of the trade, from memory).
    #[must_use]
    pub fn variation_warning(&self, view_mm: f64) -> Option<String> {
        /// Relative variation from which it is said.
        const SAID: f64 = 0.05;
        let variation = self.fixture.variation(view_mm);
        (variation > SAID).then(|| {
            format!("the stress varies by {:.0} % over the {view_mm:.2} mm of the view; the stress given is that at the filmed spot", 100.0 * variation)
        })
    }

    fn u_stress(&self, force_n: Option<f64>, logged_mpa: Option<f64>) -> Option<f64> {
        let half = |up: Option<f64>, down: Option<f64>| Some(0.5 * (up? - down?));
        let mut parts: Vec<Option<f64>> = self
            .moved
            .iter()
            .map(|[up, down]| half(up.stress_mpa(force_n, logged_mpa), down.stress_mpa(force_n, logged_mpa)))
            .collect();
        if let (Some(u), Some(force)) = (self.u_force_n, force_n) {
            let at = |by: f64| self.fixture.stress_mpa(Some(force + by), logged_mpa);
            parts.push(half(at(u), at(-u)));
        }
        if self.fixture == Fixture::Stress {
            parts.push(self.u_stress_mpa);
        }
        let squares: Vec<f64> = parts.into_iter().flatten().map(|part| part * part).collect();
        (!squares.is_empty()).then(|| squares.iter().sum::<f64>().sqrt())
    }

    /// Dimensions and stresses that are possible but unlikely: a slip of unit or of decimal point.
    fn doubts(&self, manifest: &Manifest) -> Vec<String> {
        /// A plate seen through is rarely thicker, mm (common practice).
        const THICK_MM: f64 = 2.0;
        /// Least length of a beam in thicknesses for elementary bending (common practice).
        const SLENDER: f64 = 5.0;
        /// Ceramics in bending break below this, MPa (common practice, from memory).
        const STRONG_MPA: f64 = 1000.0;
        let load = &manifest.load;
        let mut doubts = Vec::new();
        if let Some(thickness) = load.thickness_mm {
            if thickness > THICK_MM {
                doubts.push(format!(
                    "thickness_mm = {thickness}: is the plate that thick? A thin plate of 400 µm is thickness_mm = 0.4"
                ));
            }
            if let Some(width) = load.width_mm.filter(|width| *width < thickness) {
                doubts
                    .push(format!("width_mm = {width} is less than thickness_mm = {thickness}: are the two swapped?"));
            }
            for (name, length) in [("arm_mm", load.arm_mm), ("span_mm", load.span_mm)] {
                if let Some(length) = length.filter(|length| *length < SLENDER * thickness) {
                    doubts.push(format!("{name} = {length} is short for a plate {thickness} mm thick; simple bending does not hold below {SLENDER} thicknesses"));
                }
            }
        }
        let largest = self.largest_stress();
        if largest > STRONG_MPA {
            doubts.push(format!("the stress reaches {largest:.0} MPa, at which a ceramic plate would have broken: check the unit of the force and the dimensions"));
        }
        if self.log.force_is_all_negative() {
            doubts.push("the whole force log is negative: does the logger sign pressing as negative? If so, type scale = { force_n = -1.0 } in [load]".to_owned());
        }
        doubts
    }

    fn largest_stress(&self) -> f64 {
        let range = |series: &Option<Series>| series.as_ref().and_then(Series::range);
        let ends = |range: Option<(f64, f64)>| range.map_or([None, None], |(low, high)| [Some(low), Some(high)]);
        let forces = ends(range(&self.log.force_n)).into_iter().map(|force| self.fixture.stress_mpa(force, None));
        let logged = ends(range(&self.log.stress_mpa)).into_iter().map(|stress| self.fixture.stress_mpa(None, stress));
        forces.chain(logged).flatten().map(f64::abs).fold(0.0, f64::max)
    }
}

/// The log must hold what the fixture turns into stress, and a direction where the fixture needs one.
fn needs_column(manifest: &Manifest, fixture: &Fixture, log: &LoadLog) -> Result<(), ManifestError> {
    let missing = match fixture {
        Fixture::None | Fixture::Fixed { .. } => None,
        Fixture::Stress => log.stress_mpa.is_none().then_some("stress_mpa"),
        Fixture::Uniaxial { .. } | Fixture::Beam(_) | Fixture::RingOnRing { .. } => {
            log.force_n.is_none().then_some("force_n")
        }
    };
    if let Some(column) = missing {
        let what = format!("this fixture needs {column}, which the load log does not hold");
        let help = format!(
            "name its heading: columns = {{ {column} = \"…\" }}; or choose the fixture that fits the log (\"stress\" for a logged stress)"
        );
        return Err(manifest.fault("load", "fixture", what, help));
    }
    let directed = !matches!(
        manifest.load.fixture,
        FixtureName::None | FixtureName::Stack | FixtureName::Normal | FixtureName::RingOnRing | FixtureName::Film
    );
    if directed && log.direction_deg.is_none() {
        return Err(manifest.fault("load", "fixture", "nothing says along which direction the load acts", "add direction_deg = 90.0 to [load] (degrees anticlockwise from x to the right), or a column direction_deg to the log"));
    }
    Ok(())
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::run::Clock;

    fn load(section: &str) -> Result<Load, ManifestError> {
        let text = format!(
            "[frames]\nfiles = \"*.png\"\ninterval_s = 1\num_per_px = 1\nfilament = \"darker\"\nbare = 0\n\
             [cell]\nplating_edge = [[0, 0], [0, 9]]\nfar_edge = [[9, 0], [9, 9]]\n[load]\n{section}"
        );
        let manifest = Manifest::parse(&text, std::path::Path::new("ridge")).unwrap();
        let clock = Clock { zero_s: 0.0, start_unix_s: None, utc_offset_s: None };
        Load::new(&manifest, LoadLog::open(&manifest, &clock).unwrap())
    }

    const BEAM: &str = "force_n = 1.5\nfixture = \"cantilever\"\nwidth_mm = 4\nthickness_mm = 0.5\narm_mm = 12\nside = \"compressed\"\ndirection_deg = 90\n";

    #[test]
    fn a_beam_with_uncertain_dimensions() {
        let beam = load(&format!("{BEAM}u_thickness_mm = 0.01\nu_force_n = 0.03\nu_width_mm = 0.02")).unwrap();
        let state = beam.at(5.0, None);
        assert!((state.stress_mpa.unwrap() - 108.0).abs() < 1e-9);
        assert_eq!(state.direction_deg, Some(90.0));
        // Relative: 2·0.01/0.5, 0.03/1.5 and 0.02/4 in squares.
        let expected = 108.0 * (0.04_f64.powi(2) + 0.02_f64.powi(2) + 0.005_f64.powi(2)).sqrt();
        assert!((state.u_stress_mpa.unwrap() / expected - 1.0).abs() < 2e-3);
        assert_eq!(load(BEAM).unwrap().at(5.0, None).u_stress_mpa, None);
    }

    #[test]
    fn no_load_keeps_a_direction_and_no_stress() {
        let state = load("direction_deg = 30\nzero_deg = 90").unwrap().at(0.0, None);
        assert_eq!((state.direction_deg, state.stress_mpa, state.force_n), (Some(120.0), None, None));
        assert_eq!(load("").unwrap().at(0.0, None), LoadState::default());
    }

    #[test]
    fn fixtures_without_an_axis_have_none() {
        let state =
            load("stress_mpa = 40\nfixture = \"normal\"\ndirection_deg = 30").unwrap().at(0.0, Some([1.0, 1.0]));
        assert_eq!((state.direction_deg, state.stress_mpa), (None, Some(40.0)));
        let state = load("force_n = 8\nfixture = \"stack\"\narea_mm2 = 4").unwrap().at(0.0, Some([1.0, 1.0]));
        assert_eq!((state.direction_deg, state.stress_mpa), (Some(0.0), Some(2.0)));
    }

    #[test]
    fn what_does_not_fit_is_said() {
        assert!(
            load("force_n = 1\nfixture = \"stress\"\ndirection_deg = 0").unwrap_err().what.contains("needs stress_mpa")
        );
        assert!(load("stress_mpa = 1\nfixture = \"stress\"").unwrap_err().what.contains("along which direction"));
        let thick = load(&BEAM.replace("thickness_mm = 0.5", "thickness_mm = 5")).unwrap();
        assert_eq!(thick.warnings.len(), 3, "{:?}", thick.warnings);
        let strong = load(&BEAM.replace("force_n = 1.5", "force_n = 1500")).unwrap();
        assert!(strong.warnings[0].contains("108000 MPa"), "{:?}", strong.warnings);
        let pulled = load(&BEAM.replace("force_n = 1.5", "force_n = -1.5")).unwrap();
        assert!(pulled.warnings[0].contains("negative"), "{:?}", pulled.warnings);
    }

    #[test]
    fn the_view_along_a_beam() {
        let beam = load(BEAM).unwrap();
        assert!(beam.variation_warning(1.2).unwrap().contains("10 %"));
        assert_eq!(beam.variation_warning(0.3), None);
    }
}
