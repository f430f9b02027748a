//! Controllers as the plant has them: settings in their own form and unit, executed at their own scan.

/// Which way the output goes when the PV rises.
#[derive(Clone, Copy, PartialEq)]
pub enum Action {
    /// PV up, OP up.
    Direct,
    /// PV up, OP down.
    Reverse,
}

/// The equation that the settings belong to.
#[derive(Clone, Copy, PartialEq)]
pub enum Form {
    /// `Kc (1 + 1/(Ti s) + Td s)`.
    Standard,
    /// `Kc (1 + 1/(Ti s)) (1 + Td s)`.
    Series,
    /// `Kp + Ki/s + Kd s`.
    Parallel,
}

/// What the first setting is.
#[derive(Clone, Copy, PartialEq)]
pub enum PAs {
    /// Gain, %/%.
    Gain,
    /// Proportional band, %.
    Band,
    /// OP % for each PV unit.
    GainPerUnit,
}

/// What the second setting is.
#[derive(Clone, Copy, PartialEq)]
pub enum IAs {
    /// Integral time, s.
    Seconds,
    /// Integral time, min.
    Minutes,
    /// Repeats (parallel: integral gain) per second.
    PerSecond,
    /// Repeats (parallel: integral gain) per minute.
    PerMinute,
}

/// The three numbers at the faceplate; the last is in minutes where the loop says so.
#[derive(Clone, Copy)]
pub struct Settings {
    /// Proportional.
    pub p: f64,
    /// Integral.
    pub i: f64,
    /// Derivative; 0: not used.
    pub d: f64,
}

/// One controller's type and how its settings read.
#[derive(Clone, Copy)]
pub struct ControllerSpec {
    /// Action that works.
    pub action: Action,
    /// Form.
    pub form: Form,
    /// Meaning of P.
    pub p_as: PAs,
    /// Meaning of I.
    pub i_as: IAs,
    /// Derivative in minutes rather than seconds.
    pub d_minutes: bool,
    /// N of the derivative filter Td/N.
    pub d_filter: f64,
    /// Execution interval, s.
    pub scan_s: f64,
}

/// A controller in automatic: P on the error, D on the PV, output clamped to 0-100 %.
pub struct Controller {
    sign: f64,
    series: bool,
    gain: f64,
    integral_gain_per_s: f64,
    derivative_gain_s: f64,
    filter_s: f64,
    scan_s: f64,
    integral: Option<f64>,
    filtered_pv: f64,
}

impl Controller {
    /// `pv_span` is needed where the gain is per PV unit.
    pub fn new(spec: &ControllerSpec, settings: Settings, pv_span: f64) -> Self {
        let scale = match spec.p_as {
            PAs::GainPerUnit => pv_span / 100.0,
            PAs::Gain | PAs::Band => 1.0,
        };
        let gain = match spec.p_as {
            PAs::Band => 100.0 / settings.p,
            PAs::Gain | PAs::GainPerUnit => settings.p * scale,
        };
        let repeats_per_s = match spec.i_as {
            IAs::Seconds => 1.0 / settings.i,
            IAs::Minutes => 1.0 / (60.0 * settings.i),
            IAs::PerSecond => settings.i,
            IAs::PerMinute => settings.i / 60.0,
        };
        let derivative = settings.d * if spec.d_minutes { 60.0 } else { 1.0 };
        let (integral_gain_per_s, derivative_gain_s) = match spec.form {
            Form::Standard | Form::Series => (gain * repeats_per_s, gain * derivative),
            Form::Parallel => (repeats_per_s * scale, derivative * scale),
        };
        Self {
            sign: match spec.action {
                Action::Direct => -1.0,
                Action::Reverse => 1.0,
            },
            series: spec.form == Form::Series,
            gain,
            integral_gain_per_s,
            derivative_gain_s,
            filter_s: derivative_gain_s / gain / spec.d_filter,
            scan_s: spec.scan_s,
            integral: None,
            filtered_pv: 0.0,
        }
    }

    /// Integral gain, % of OP per second for each % of error.
    pub fn integral_gain_per_s(&self) -> f64 {
        self.integral_gain_per_s
    }

    /// One execution: the new output, %. `op` is the present output, from which the first one starts without a bump.
    pub fn execute(&mut self, sp: f64, pv: f64, op: f64) -> f64 {
        let slope = self.slope(pv);
        let (error, derivative) = if self.series {
            // The lead acts on what both other terms see.
            let lead = self.derivative_gain_s / self.gain * slope;
            (self.sign * (sp - pv - lead), 0.0)
        } else {
            let derivative = -self.sign * self.derivative_gain_s * slope;
            (self.sign * (sp - pv), derivative)
        };
        let integral = match self.integral {
            Some(integral) => integral + self.integral_gain_per_s * self.scan_s * error,
            None => op - self.gain * error - derivative,
        };
        let wanted = self.gain * error + integral + derivative;
        let output = wanted.clamp(0.0, 100.0);
        // At a stop the integral keeps its value, so that it does not wind up.
        if wanted == output || self.integral.is_none() {
            self.integral = Some(integral);
        }
        output
    }

    fn slope(&mut self, pv: f64) -> f64 {
        if self.filter_s == 0.0 {
            return 0.0;
        }
        if self.integral.is_none() {
            self.filtered_pv = pv;
        }
        self.filtered_pv += -(-self.scan_s / self.filter_s).exp_m1() * (pv - self.filtered_pv);
        (pv - self.filtered_pv) / self.filter_s
    }
}
