//! The `[plan]` table of `run.toml`: load and current that are to follow, for the forecast alone.
//! Method: steps in order of run time, each in force until the next; what a step leaves out goes on as it was last logged.
//! Limits: a step whose time has passed is left to the logs, so that the plan never stands against what was measured.

use serde::{Deserialize, Serialize};

use super::manifest::{Manifest, ManifestError};

/// `[plan]` of `run.toml`.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields, default)]
pub struct PlanSection {
    /// What is to come, in order of time.
    pub steps: Vec<PlannedStep>,
}

/// One step of the plan.
#[derive(Debug, Clone, Copy, Default, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct PlannedStep {
    /// Run time from which it holds, s since the first frame.
    pub time_s: f64,
    /// Cell current, mA, positive when it plates.
    pub current_ma: Option<f64>,
    /// Stress along the load axis, MPa, positive in compression.
    pub stress_mpa: Option<f64>,
    /// Load direction, counted as in the load log, degrees.
    pub direction_deg: Option<f64>,
}

impl PlanSection {
    /// Whether nothing is planned.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.steps.is_empty()
    }

    /// Steps in order, each with something in it, all numbers finite.
    ///
    /// # Errors
    /// [`ManifestError`] at `steps`.
    pub(super) fn check(&self, manifest: &Manifest) -> Result<(), ManifestError> {
        let wrong = |what: String, help: &str| Err(manifest.fault("plan", "steps", what, help));
        for (k, step) in self.steps.iter().enumerate() {
            let given = [step.current_ma, step.stress_mpa, step.direction_deg];
            let numbers = given.into_iter().flatten().chain([step.time_s]);
            if numbers.into_iter().any(|value| !value.is_finite()) {
                return wrong(format!("step {} of the plan holds a number that is not finite", k + 1), "type a number");
            }
            if given.iter().all(Option::is_none) {
                let help = "give it current_ma, stress_mpa or direction_deg, or drop it";
                return wrong(format!("step {} of the plan changes nothing", k + 1), help);
            }
        }
        if self.steps.windows(2).any(|pair| pair[1].time_s <= pair[0].time_s) {
            return wrong("the steps of the plan are not in order of time".to_owned(), "sort them by time_s");
        }
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn parse(plan: &str) -> Result<Manifest, ManifestError> {
        let text = format!(
            "[frames]\nfiles = \"f/*.png\"\ninterval_s = 10\num_per_px = 1\nfilament = \"darker\"\nbare = 0\n\
             [cell]\nplating_edge = [[0, 0], [0, 9]]\nfar_edge = [[90, 0], [90, 9]]\n[plan]\n{plan}\n"
        );
        Manifest::parse(&text, "r".as_ref())
    }

    #[test]
    fn steps_are_read_in_order() {
        let plan =
            parse("steps = [{ time_s = 60, current_ma = 0.5 }, { time_s = 90, stress_mpa = -20 }]").unwrap().plan;
        assert_eq!((plan.steps[0].current_ma, plan.steps[1].stress_mpa), (Some(0.5), Some(-20.0)));
        assert!(parse("").unwrap().plan.is_empty());
    }

    #[test]
    fn slips_name_their_line() {
        let line = |plan| parse(plan).unwrap_err().to_string();
        let backwards = "steps = [{ time_s = 60, current_ma = 1 }, { time_s = 60, current_ma = 2 }]";
        assert!(line(backwards).contains("line 11: the steps of the plan are not in order"), "{}", line(backwards));
        assert!(line("steps = [{ time_s = 60 }]").contains("step 1 of the plan changes nothing"));
        assert!(line("steps = [{ time_s = nan, current_ma = 1 }]").contains("not finite"));
        assert!(line("stesp = []").contains("unknown key `stesp`"));
    }
}
