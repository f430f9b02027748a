//! Margins over every model the design has to be safe for.

use crate::identify::Model;
use crate::model::ProcessModel;
use crate::predict::open_loop::{Loop, open_loop};
use crate::predict::{Margins, PvFilter, margins};
use crate::settings::{Action, Controller, Terms};
use schemars::JsonSchema;
use serde::{Deserialize, Serialize};

/// The worst of each margin over the fitted model and its set, and the models that have it.
///
/// One unstable model makes the whole unstable: no margin is then given.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct WorstMargins {
    /// The worst of each.
    #[serde(flatten)]
    pub margins: Margins,
    /// The model with the largest Ms, or the first unstable one: "the model of step 2".
    pub worst_model: String,
}

/// Name of the fitted model in texts.
const FITTED: &str = "the fitted model";

/// A member's label within a sentence: "step 2" is "the model of step 2".
fn in_words(label: &str) -> String {
    if label.starts_with("step") {
        format!("the model of {label}")
    } else {
        format!("the model at the {label}")
    }
}

/// Every model the design has to be safe for, the fitted one first, named as in a sentence.
fn all_models(model: &Model) -> Vec<(String, ProcessModel)> {
    let mut all = vec![(FITTED.to_owned(), model.process())];
    all.extend(other_models(model));
    all
}

/// The models of the set, without the fitted one, named as in a sentence.
pub fn other_models(model: &Model) -> Vec<(String, ProcessModel)> {
    let members = model.set_models().into_iter();
    members
        .map(|(label, member)| (in_words(label), member))
        .collect()
}

/// The worst of each margin over the fitted model and its set.
pub fn worst_margins(
    model: &Model,
    terms: &Terms,
    controller: &Controller,
    filter: PvFilter,
    action: Action,
) -> WorstMargins {
    let mut worst: Option<WorstMargins> = None;
    for (name, process) in all_models(model) {
        let found = margins(&process, terms, controller, filter, action);
        if !found.stable {
            return WorstMargins {
                margins: found,
                worst_model: name,
            };
        }
        let Some(so_far) = &mut worst else {
            worst = Some(WorstMargins {
                margins: found,
                worst_model: name,
            });
            continue;
        };
        if found.ms > so_far.margins.ms {
            so_far.worst_model = name;
        }
        let margins = &mut so_far.margins;
        margins.ms = larger(margins.ms, found.ms);
        margins.mt = larger(margins.mt, found.mt);
        margins.gain_margin = smaller(margins.gain_margin, found.gain_margin);
        margins.phase_margin_deg = smaller(margins.phase_margin_deg, found.phase_margin_deg);
        margins.delay_margin_s = smaller(margins.delay_margin_s, found.delay_margin_s);
    }
    worst.expect("the fitted model is always among them")
}

fn larger(a: Option<f64>, b: Option<f64>) -> Option<f64> {
    a.zip(b).map(|(a, b)| a.max(b)).or(a).or(b)
}

fn smaller(a: Option<f64>, b: Option<f64>) -> Option<f64> {
    a.zip(b).map(|(a, b)| a.min(b)).or(a).or(b)
}

/// The robustness limit: every model with its name, and the Ms it is allowed.
#[derive(Debug, Clone)]
pub struct RobustnessLimit {
    members: Vec<(String, ProcessModel, f64)>,
    controller: Controller,
    filter: PvFilter,
    action: Action,
}

/// How near to its bound a controller comes, and on which model.
#[derive(Debug, Clone, PartialEq)]
pub struct Nearest {
    /// The model, as in a sentence.
    pub model: String,
    /// Whether it is the fitted one.
    pub fitted: bool,
    /// Its Ms; infinite where unstable.
    pub ms: f64,
    /// The Ms it is allowed.
    pub bound: f64,
}

impl RobustnessLimit {
    /// The limit Ms ≤ `ms` on the fitted model and ≤ `worst_ms` on every model of the set.
    pub fn new(
        model: &Model,
        ms: f64,
        worst_ms: f64,
        controller: &Controller,
        filter: PvFilter,
    ) -> Self {
        let members = all_models(model)
            .into_iter()
            .enumerate()
            .map(|(k, (name, process))| (name, process, if k == 0 { ms } else { worst_ms }))
            .collect();
        RobustnessLimit {
            members,
            controller: *controller,
            filter,
            action: Action::for_gain(model.gain.value),
        }
    }

    fn ms(&self, process: &ProcessModel, terms: &Terms) -> f64 {
        let margins = self.open_loop(process, terms).margins();
        margins.ms.unwrap_or(f64::INFINITY)
    }

    fn open_loop(&self, process: &ProcessModel, terms: &Terms) -> Loop {
        open_loop(process, terms, &self.controller, self.filter, self.action)
    }

    /// Whether every model keeps its bound.
    pub fn holds(&self, terms: &Terms) -> bool {
        self.members
            .iter()
            .all(|(_, process, bound)| self.open_loop(process, terms).keeps_ms(*bound))
    }

    /// The model that comes nearest to its bound, or exceeds it by most.
    pub fn nearest(&self, terms: &Terms) -> Nearest {
        let mut nearest: Option<Nearest> = None;
        for (k, (name, process, bound)) in self.members.iter().enumerate() {
            let ms = self.ms(process, terms);
            if nearest.as_ref().is_none_or(|n| ms / bound > n.ms / n.bound) {
                nearest = Some(Nearest {
                    model: name.clone(),
                    fitted: k == 0,
                    ms,
                    bound: *bound,
                });
            }
        }
        nearest.expect("the fitted model is always among them")
    }
}
