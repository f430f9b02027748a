//! Controller settings: what is typed at a faceplate, and the same in standard form.
//!
//! Names of the forms are those of ISA-TR5.9-2023. Conversions are those of the unfiltered forms
//! (K.J. Åström, T. Hägglund, PID Controllers, 2nd ed. 1995, sec. 3.2).

use crate::quantity::Span;
use schemars::JsonSchema;
use serde::{Deserialize, Serialize};

/// Controller action: which way the OP moves when the PV rises.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
#[serde(rename_all = "kebab-case")]
pub enum Action {
    /// OP rises when the PV rises; for processes of negative gain.
    Direct,
    /// OP falls when the PV rises; for processes of positive gain.
    Reverse,
}

impl Action {
    /// The action that makes feedback negative on a process of this gain.
    pub fn for_gain(gain: f64) -> Self {
        if gain < 0.0 {
            Action::Direct
        } else {
            Action::Reverse
        }
    }

    /// Sign of Kc in u = Kc·(SP − PV): +1 for reverse, −1 for direct.
    pub fn sign(self) -> f64 {
        match self {
            Action::Direct => -1.0,
            Action::Reverse => 1.0,
        }
    }
}

/// Form of the PID equation.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
#[serde(rename_all = "kebab-case")]
pub enum EquationForm {
    /// Kc·(1 + 1/(Ti s) + Td s/(1 + Td s/N)).
    Standard,
    /// Kc′·(1 + 1/(Ti′ s))·(1 + Td′ s)/(1 + Td′ s/N).
    Series,
    /// Kp + Ki/s + Kd s/(1 + Kd s/(Kp N)).
    Parallel,
}

/// How the proportional setting is typed.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
#[serde(rename_all = "kebab-case")]
pub enum ProportionalUnit {
    /// Gain, % OP per % PV.
    Gain,
    /// Proportional band, % (100 / gain).
    Band,
    /// Gain, % OP per engineering unit of the PV.
    GainPerUnit,
}

/// How the integral setting is typed.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
pub enum IntegralUnit {
    /// Integral time, s.
    #[serde(rename = "s")]
    Seconds,
    /// Integral time, min.
    #[serde(rename = "min")]
    Minutes,
    /// Repeats per second (parallel: integral gain per second).
    #[serde(rename = "1/s")]
    PerSecond,
    /// Repeats per minute (parallel: integral gain per minute).
    #[serde(rename = "1/min")]
    PerMinute,
}

/// How the derivative setting is typed.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
pub enum DerivativeUnit {
    /// Seconds (parallel: P unit times s).
    #[serde(rename = "s")]
    Seconds,
    /// Minutes (parallel: P unit times min).
    #[serde(rename = "min")]
    Minutes,
}

/// The signal that a term of the controller acts on.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
#[serde(rename_all = "kebab-case")]
pub enum ActsOn {
    /// SP − PV.
    Error,
    /// PV alone: a set-point move does not reach the term.
    Pv,
}

/// How one controller works and how its settings are typed. The settings themselves are elsewhere.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Controller {
    /// Form of the equation.
    pub form: EquationForm,
    /// How P is typed.
    pub p_as: ProportionalUnit,
    /// How I is typed.
    pub i_as: IntegralUnit,
    /// How D is typed.
    pub d_as: DerivativeUnit,
    /// What the proportional term acts on.
    pub p_on: ActsOn,
    /// What the derivative term acts on.
    pub d_on: ActsOn,
    /// N of the derivative filter; 0 for none.
    pub d_filter_n: f64,
    /// Execution interval, s; above 0.
    pub scan_s: f64,
    /// Range of the PV.
    pub pv_span: Span,
    /// Range of the OP.
    pub op_span: Span,
}

/// The three numbers as typed at the faceplate; magnitudes. I or D of 0: not used.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Native {
    /// Proportional setting in the controller's unit.
    pub p: f64,
    /// Integral setting in the controller's unit; 0 off.
    pub i: f64,
    /// Derivative setting in the controller's unit; 0 off.
    pub d: f64,
}

/// Settings in standard form, % OP per % PV and seconds; magnitudes.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Standard {
    /// Controller gain Kc, % OP per % PV.
    pub kc: f64,
    /// Integral time Ti, s; `None` without integral action.
    pub ti_s: Option<f64>,
    /// Derivative time Td, s; 0 without derivative action.
    pub td_s: f64,
}

/// The three terms of a controller in its own form, in % OP per % PV and seconds: what margins and
/// simulation are computed with, so that each form keeps its own derivative filter.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Terms {
    /// Kc, Ti (None: no integral), Td.
    Standard {
        /// Kc, %/%.
        kc: f64,
        /// Ti, s.
        ti_s: Option<f64>,
        /// Td, s.
        td_s: f64,
    },
    /// Kc′, Ti′ (None: no integral), Td′.
    Series {
        /// Kc′, %/%.
        kc: f64,
        /// Ti′, s.
        ti_s: Option<f64>,
        /// Td′, s.
        td_s: f64,
    },
    /// Kp, Ki, Kd.
    Parallel {
        /// Kp, %/%.
        kp: f64,
        /// Ki, %/% per s.
        ki_per_s: f64,
        /// Kd, %/% s.
        kd_s: f64,
    },
}

impl Standard {
    /// The series form of the same unfiltered controller: (Kc′, Ti′, Td′) with Ti′ ≥ Td′.
    /// `None` where Ti < 4 Td: no series controller is that one.
    pub fn series(self) -> Option<(f64, Option<f64>, f64)> {
        let Some(ti) = self.ti_s else {
            // Without integral action both forms are Kc (1 + Td s).
            return Some((self.kc, None, self.td_s));
        };
        // At the edge Ti = 4 Td rounding of what came from a series form must not lose it.
        const ROUNDING: f64 = 1e-12;
        let under_root = 1.0 - 4.0 * self.td_s / ti;
        if under_root < -ROUNDING {
            return None;
        }
        let half = (1.0 + libm::sqrt(under_root.max(0.0))) / 2.0;
        // Td′ from the product Ti′·Td′ = Ti·Td, which keeps its figures where Td is small.
        Some((self.kc * half, Some(ti * half), self.td_s / half))
    }

    /// The standard form of a series controller (unfiltered).
    pub fn from_series(kc: f64, ti_s: Option<f64>, td_s: f64) -> Self {
        match ti_s {
            None => Standard {
                kc,
                ti_s: None,
                td_s,
            },
            Some(ti) => Standard {
                kc: kc * (1.0 + td_s / ti),
                ti_s: Some(ti + td_s),
                td_s: ti * td_s / (ti + td_s),
            },
        }
    }

    /// The parallel gains (Kp, Ki per s, Kd s).
    pub fn parallel(self) -> (f64, f64, f64) {
        (
            self.kc,
            self.ti_s.map_or(0.0, |ti| self.kc / ti),
            self.kc * self.td_s,
        )
    }

    /// The standard form of parallel gains; `None` where Kp is 0.
    pub fn from_parallel(kp: f64, ki_per_s: f64, kd_s: f64) -> Option<Self> {
        (kp > 0.0).then(|| Standard {
            kc: kp,
            ti_s: (ki_per_s > 0.0).then(|| kp / ki_per_s),
            td_s: kd_s / kp,
        })
    }
}

impl Terms {
    /// The unfiltered standard form; `None` for a parallel controller without proportional gain.
    pub fn standard(self) -> Option<Standard> {
        match self {
            Terms::Standard { kc, ti_s, td_s } => Some(Standard { kc, ti_s, td_s }),
            Terms::Series { kc, ti_s, td_s } => Some(Standard::from_series(kc, ti_s, td_s)),
            Terms::Parallel { kp, ki_per_s, kd_s } => Standard::from_parallel(kp, ki_per_s, kd_s),
        }
    }
}

impl Controller {
    /// % OP per % PV for one typed unit of gain.
    fn gain_factor(&self) -> f64 {
        match self.p_as {
            ProportionalUnit::Gain | ProportionalUnit::Band => 1.0,
            // Typed: % OP per engineering unit; one % of PV is width/100 units.
            ProportionalUnit::GainPerUnit => self.pv_span.width() / 100.0,
        }
    }

    /// What typed numbers mean, in % OP per % PV and seconds, in the controller's own form.
    ///
    /// A proportional band of 0 has no meaning and is refused where the schedule is read.
    pub fn terms(&self, native: Native) -> Terms {
        let gain = match self.p_as {
            ProportionalUnit::Band => 100.0 / native.p,
            _ => native.p * self.gain_factor(),
        };
        let d_s = match self.d_as {
            DerivativeUnit::Seconds => native.d,
            DerivativeUnit::Minutes => native.d * 60.0,
        };
        if self.form == EquationForm::Parallel {
            let ki = match self.i_as {
                IntegralUnit::PerMinute => native.i / 60.0,
                _ => native.i,
            };
            return Terms::Parallel {
                kp: gain,
                ki_per_s: ki * self.gain_factor(),
                kd_s: d_s * self.gain_factor(),
            };
        }
        let ti_s = (native.i > 0.0).then(|| match self.i_as {
            IntegralUnit::Seconds => native.i,
            IntegralUnit::Minutes => native.i * 60.0,
            IntegralUnit::PerSecond => 1.0 / native.i,
            IntegralUnit::PerMinute => 60.0 / native.i,
        });
        match self.form {
            EquationForm::Series => Terms::Series {
                kc: gain,
                ti_s,
                td_s: d_s,
            },
            _ => Terms::Standard {
                kc: gain,
                ti_s,
                td_s: d_s,
            },
        }
    }

    /// The numbers to type for settings in standard form, unrounded; `None` where the controller's
    /// form cannot hold them (series with Ti < 4 Td).
    pub fn native(&self, standard: Standard) -> Option<Native> {
        let (gain, i_s, d_s, parallel_i) = match self.form {
            EquationForm::Standard => (standard.kc, standard.ti_s, standard.td_s, None),
            EquationForm::Series => {
                let (kc, ti_s, td_s) = standard.series()?;
                (kc, ti_s, td_s, None)
            }
            EquationForm::Parallel => {
                let (kp, ki, kd) = standard.parallel();
                (
                    kp,
                    None,
                    kd / self.gain_factor(),
                    Some(ki / self.gain_factor()),
                )
            }
        };
        let p = match self.p_as {
            ProportionalUnit::Band => 100.0 / gain,
            _ => gain / self.gain_factor(),
        };
        let i = match (parallel_i, i_s) {
            (Some(ki), _) => match self.i_as {
                IntegralUnit::PerMinute => ki * 60.0,
                _ => ki,
            },
            (None, None) => 0.0,
            (None, Some(ti)) => match self.i_as {
                IntegralUnit::Seconds => ti,
                IntegralUnit::Minutes => ti / 60.0,
                IntegralUnit::PerSecond => 1.0 / ti,
                IntegralUnit::PerMinute => 60.0 / ti,
            },
        };
        let d = match self.d_as {
            DerivativeUnit::Seconds => d_s,
            DerivativeUnit::Minutes => d_s / 60.0,
        };
        Some(Native { p, i, d })
    }
}

impl Native {
    /// The same with every number rounded to what a faceplate takes: 4 significant digits.
    pub fn rounded(self) -> Self {
        let round = |value| crate::quantity::round_significant(value, 4);
        Native {
            p: round(self.p),
            i: round(self.i),
            d: round(self.d),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;
    use proptest::test_runner::RngSeed;

    fn standard(kc: f64, ti_s: f64, td_s: f64) -> Standard {
        Standard {
            kc,
            ti_s: Some(ti_s),
            td_s,
        }
    }

    fn assert_near(found: (f64, Option<f64>, f64), expected: (f64, f64, f64)) {
        let (kc, ti, td) = (found.0, found.1.expect("integral action"), found.2);
        for (found, expected) in [(kc, expected.0), (ti, expected.1), (td, expected.2)] {
            // Ten figures are quoted.
            assert!(
                (found - expected).abs() <= 1e-9 * expected.abs(),
                "{found}, expected {expected}"
            );
        }
    }

    fn parts(settings: Standard) -> (f64, Option<f64>, f64) {
        (settings.kc, settings.ti_s, settings.td_s)
    }

    // K.J. Åström, T. Hägglund, PID Controllers, 2nd ed. 1995, sec. 3.2, recomputed.
    #[test]
    fn forms_convert_as_in_the_textbook() {
        let pid = standard(2.0, 10.0, 2.0);
        assert_eq!(pid.parallel(), (2.0, 0.2, 4.0));
        assert_eq!(Standard::from_parallel(2.0, 0.2, 4.0), Some(pid));
        let series = |s: Standard| s.series().expect("a series form");
        assert_near(series(pid), (1.447_213_595_5, 7.236_067_977, 2.763_932_023));
        // The edge Ti = 4 Td, and beyond it.
        assert_near(series(standard(10.0, 8.0, 2.0)), (5.0, 4.0, 4.0));
        assert_eq!(standard(5.0, 6.0, 2.0).series(), None);
        assert_near(
            parts(Standard::from_series(1.3, Some(2.0), 1.2)),
            (2.08, 3.2, 0.75),
        );
        // Two series sets are one controller: the one with Ti′ ≥ Td′ comes back.
        let swapped = Standard::from_series(2.0, Some(2.0), 6.0);
        assert_near(parts(swapped), (8.0, 8.0, 1.5));
        assert_near(series(swapped), (6.0, 6.0, 2.0));
    }

    fn controller(form: EquationForm) -> Controller {
        Controller {
            form,
            p_as: ProportionalUnit::Band,
            i_as: IntegralUnit::PerMinute,
            d_as: DerivativeUnit::Minutes,
            p_on: ActsOn::Error,
            d_on: ActsOn::Pv,
            d_filter_n: 10.0,
            scan_s: 1.0,
            pv_span: Span::new(60.0, 140.0).expect("a range"),
            op_span: Span::new(0.0, 100.0).expect("a range"),
        }
    }

    #[test]
    fn typed_numbers_mean_what_the_faceplate_says() {
        // PB % = 100/Kc; repeats/min = 60/Ti.
        let native = Native {
            p: 40.0,
            i: 0.5,
            d: 0.25,
        };
        let expected = Terms::Standard {
            kc: 2.5,
            ti_s: Some(120.0),
            td_s: 15.0,
        };
        assert_eq!(controller(EquationForm::Standard).terms(native), expected);
        // 0.5 % OP per degC on a span of 80 degC is 0.4 % per %; so with the parallel gains.
        let parallel = Controller {
            p_as: ProportionalUnit::GainPerUnit,
            ..controller(EquationForm::Parallel)
        };
        let native = Native {
            p: 0.5,
            i: 3.0,
            d: 0.1,
        };
        let Terms::Parallel { kp, ki_per_s, kd_s } = parallel.terms(native) else {
            panic!("a parallel controller has parallel terms");
        };
        assert!((kp - 0.4).abs() < 1e-12);
        assert!((ki_per_s - 0.04).abs() < 1e-12);
        assert!((kd_s - 4.8).abs() < 1e-12);
        // Integral and derivative off.
        let off = Native {
            p: 40.0,
            i: 0.0,
            d: 0.0,
        };
        let p_only = controller(EquationForm::Series).terms(off).standard();
        assert_eq!(p_only.map(parts), Some((2.5, None, 0.0)));
    }

    proptest! {
        #![proptest_config(ProptestConfig {
            cases: 64,
            rng_seed: RngSeed::Fixed(1),
            failure_persistence: None,
            ..ProptestConfig::default()
        })]
        #[test]
        fn settings_survive_the_faceplate(
            kc in 0.01..50.0_f64,
            ti in 0.5..5000.0_f64,
            part in 0.0..0.25_f64,
            form in prop::sample::select(vec![
                EquationForm::Standard, EquationForm::Series, EquationForm::Parallel,
            ]),
            p_as in prop::sample::select(vec![
                ProportionalUnit::Gain, ProportionalUnit::Band, ProportionalUnit::GainPerUnit,
            ]),
            i_as in prop::sample::select(vec![
                IntegralUnit::Seconds, IntegralUnit::Minutes,
                IntegralUnit::PerSecond, IntegralUnit::PerMinute,
            ]),
            d_as in prop::sample::select(vec![DerivativeUnit::Seconds, DerivativeUnit::Minutes]),
            terms in prop::sample::select(vec!["P", "PI", "PD", "PID"]),
        ) {
            // Parallel gains are never typed as a band or the integral as a time.
            let parallel = form == EquationForm::Parallel;
            prop_assume!(!parallel || (p_as != ProportionalUnit::Band
                && matches!(i_as, IntegralUnit::PerSecond | IntegralUnit::PerMinute)));
            let controller = Controller { p_as, i_as, d_as, ..controller(form) };
            let given = Standard {
                kc,
                ti_s: terms.contains('I').then_some(ti),
                td_s: if terms.contains('D') { part * ti } else { 0.0 },
            };
            let native = controller.native(given).expect("Ti is at least 4 Td");
            let back = controller.terms(native).standard().expect("proportional gain");
            // Near Ti = 4 Td the square root halves the figures.
            prop_assert!((back.kc / given.kc - 1.0).abs() < 1e-7);
            prop_assert_eq!(back.ti_s.is_some(), given.ti_s.is_some());
            prop_assert!((back.ti_s.unwrap_or(ti) / ti - 1.0).abs() < 1e-7);
            prop_assert!((back.td_s - given.td_s).abs() < 1e-7 * ti);
            // And typed numbers come back as typed, the four digits of a faceplate kept.
            let typed = native.rounded();
            let again = controller.terms(typed).standard().expect("proportional gain");
            // At the edge Ti = 4 Td rounding may leave what no series controller is.
            if let Some(again) = controller.native(again).map(Native::rounded) {
                let kept = |a: f64, b: f64| (a - b).abs() <= 1e-3 * b.abs();
                prop_assert!(
                    part > 0.24 || (kept(again.p, typed.p) && kept(again.i, typed.i) && kept(again.d, typed.d)),
                    "{typed:?} came back as {again:?}"
                );
            }
        }
    }
}
