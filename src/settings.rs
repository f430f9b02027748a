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
        let under_root = 1.0 - 4.0 * self.td_s / ti;
        if under_root < 0.0 {
            return None;
        }
        let half = (1.0 + libm::sqrt(under_root)) / 2.0;
        // Td′ from the product Ti′·Td′ = Ti·Td, which keeps its figures where Td is small.
        let ti_series = ti * half;
        Some((self.kc * half, Some(ti_series), self.td_s / half))
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
