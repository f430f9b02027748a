//! What the process does when OP is moved, in words and in the units that suit it.

use super::Context;
use super::numbers::estimate;
use crate::display::{self, NO_BREAK};
use crate::model::{Kind, ProcessModel};

/// What the process does when OP is moved, in words; `None` without a model.
pub(super) fn process_sentences(context: &Context) -> Option<String> {
    let block = context.record.model.as_ref()?;
    let process = block.fit.process();
    let dead = process.dead_time_s();
    let op = if context.op_unit == "%" {
        "percent".to_owned()
    } else {
        context.op_unit.clone()
    };
    let answers = if dead < 0.05 {
        "PV answers at once".to_owned()
    } else {
        format!("PV answers {} after a move of OP", display::duration(dead))
    };
    let rises = if process.gain() < 0.0 {
        "lowers"
    } else {
        "raises"
    };
    let gain = &block.gain_engineering;
    if block.fit.kind.integrates() {
        let per = slope_unit(process.gain());
        let (value, interval) = gain_words(gain, per.factor());
        let rate = format!("{}/{}", context.pv_unit, per.sign());
        let lag = match process.time_constant_s() {
            Some(lag) if block.fit.kind == Kind::IntegratingLag => {
                format!(", with a lag of {}", display::duration(lag))
            }
            _ => String::new(),
        };
        return Some(format!(
            "Each {op} of OP {rises} PV by {value}{NO_BREAK}{rate} ({interval}{NO_BREAK}{rate}), and PV does \
             not come to rest by itself. {answers}{lag}."
        ));
    }
    let covers = format!(
        "{answers} and covers 63{NO_BREAK}% of its change in a further {}.",
        display::duration(time_to_63_percent(&process))
    );
    let (value, interval) = gain_words(gain, 1.0);
    let unit = &context.pv_unit;
    let holds = if context.withheld() {
        ""
    } else {
        ", and the settings hold for all of it"
    };
    let moves = match block.fit.nonlinear_gain() {
        Some(ratio) => format!(
            "Each {op} of OP {rises} PV by {}{NO_BREAK}{unit}: the gain varies by a factor of {} over \
             the range tested{holds}.",
            gains_of_steps(context),
            display::fixed(ratio, 1)
        ),
        None => format!(
            "Each {op} of OP {rises} PV by {value}{NO_BREAK}{unit} ({interval}{NO_BREAK}{unit})."
        ),
    };
    Some(format!("{covers} {moves}"))
}

/// The smallest and the largest gain of the usable steps, "0.66 to 1.41", in engineering units.
fn gains_of_steps(context: &Context) -> String {
    context
        .record
        .gains_of_steps()
        .map_or_else(String::new, |[low, high]| {
            let decimals = super::numbers::decimals_of(&display::significant(high, 3));
            format!(
                "{} to {}",
                display::fixed(low, decimals),
                display::fixed(high, decimals)
            )
        })
}

fn gain_words(gain: &crate::record::EngineeringGain, factor: f64) -> (String, String) {
    let sign = if gain.value < 0.0 { -1.0 } else { 1.0 };
    let interval = crate::quantity::Estimate::new(
        gain.value * sign * factor,
        gain.low * sign * factor,
        gain.high * sign * factor,
    );
    estimate(interval, 1.0)
}

/// What an integrating process is told in.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum SlopeUnit {
    PerSecond,
    PerMinute,
}

impl SlopeUnit {
    /// As printed after the stroke.
    pub fn sign(self) -> &'static str {
        match self {
            SlopeUnit::PerSecond => "s",
            SlopeUnit::PerMinute => "min",
        }
    }

    /// Units per second in this unit.
    pub fn factor(self) -> f64 {
        match self {
            SlopeUnit::PerSecond => 1.0,
            SlopeUnit::PerMinute => 60.0,
        }
    }
}

/// Per minute, but for an integrator so fast that 1 % of OP moves the PV through its span within
/// some minutes.
pub(super) fn slope_unit(gain_per_s: f64) -> SlopeUnit {
    if gain_per_s.abs() >= 0.5 {
        SlopeUnit::PerSecond
    } else {
        SlopeUnit::PerMinute
    }
}

/// Time after the dead time at which a step answer has covered 63.2 % of its way, s. The answers of
/// the self-regulating kinds rise without overshoot, so that halving finds it.
fn time_to_63_percent(process: &ProcessModel) -> f64 {
    let goal = (1.0 - libm::exp(-1.0)) * process.gain().abs();
    let lags =
        process.time_constant_s().unwrap_or(0.0) + process.second_time_constant_s().unwrap_or(0.0);
    let (mut low, mut high) = (0.0, 4.0 * lags);
    for _ in 0..60 {
        let middle = 0.5 * (low + high);
        if process.step_response(process.dead_time_s() + middle).abs() < goal {
            low = middle;
        } else {
            high = middle;
        }
    }
    high
}
