//! What a plan has to say before anybody acts on it.

use super::{NotProposed, Plan, Size};
use crate::display::plain;
use crate::record::{Caution, named_procedures};
use crate::settings::Action;

/// A signal below this many times the noise makes a step one with a reservation.
const WEAK_SIGNAL: f64 = 10.0;

/// All cautions in the order of printing; `site` are the site's own for this loop.
pub(super) fn cautions(plan: &Plan, site: &[String]) -> Vec<Caution> {
    let mut list = Vec::new();
    let mut say = |about: &str, text: String| {
        list.push(Caution {
            about: about.to_owned(),
            text,
        });
    };
    let l = &plan.control_loop;
    say(
        "authority",
        format!(
            "This sheet authorises no work. The test goes through {}. Where those differ from this sheet they \
             govern, as do local codes and the judgement of the licensed or authorised engineer.",
            named_procedures(&plan.document.procedures)
        ),
    );
    if l.safety {
        say(
            "protective function",
            match &l.safety_procedure {
                Some(procedure) => format!(
                    "This loop takes part in a protective function. It is tested only under {procedure}, the \
                     procedure for protective systems; without it the test is not done."
                ),
                None => "This loop takes part in a protective function and no procedure for it is named: it is \
                         not tested."
                    .to_owned(),
            },
        );
    }
    if !plan.is_for_a_test() {
        list.extend(site.iter().map(|text| Caution {
            about: "site".to_owned(),
            text: text.clone(),
        }));
        return list;
    }
    say(
        "stopping",
        "The panel operator may end the test at any time and gives no reason. At an alarm, at a limit of the test, \
         or when another part of the plant is upset: OP back to its start, the loop as it was found."
            .to_owned(),
    );
    if let Some(process) = plan.basis.as_ref().and_then(|basis| basis.process)
        && l.action != Action::for_gain(process.gain())
    {
        let (moves, acts) = match l.action {
            Action::Direct => ("rose", "direct"),
            Action::Reverse => ("fell", "reverse"),
        };
        say(
            "sign",
            format!(
                "In the earlier test PV {moves} when OP rose, which does not fit the {acts} action of the schedule. \
                 Find out which of the two is wrong, and leave the loop in manual until then."
            ),
        );
    }
    if let Some(text) = on_size(plan) {
        say("size", text);
    }
    if let Some(basis) = &plan.basis
        && let Some(process) = basis.process
        && !process.kind().integrates()
    {
        let slowest = process.time_constant_s().unwrap_or(0.0) + process.dead_time_s();
        if l.scan_s > slowest {
            say(
                "scan time",
                format!(
                    "The controller executes every {} s, longer than time constant and dead time together \
                     ({} s): it misses the process. A shorter scan comes before a new test.",
                    plain(l.scan_s, 3),
                    plain(slowest, 2)
                ),
            );
        }
    }
    list.extend(site.iter().map(|text| Caution {
        about: "site".to_owned(),
        text: text.clone(),
    }));
    list
}

/// What has to be said of the size of the moves.
fn on_size(plan: &Plan) -> Option<String> {
    match plan.size {
        Size::Proposed {
            signal_to_noise, ..
        } if signal_to_noise < WEAK_SIGNAL => Some(format!(
            "With moves of this size PV changes by only {} times its noise. Do the series twice, or find the source \
             of the noise first.",
            plain(signal_to_noise, 2)
        )),
        Size::Proposed { .. } => Some(
            "The figures are of an earlier test. If PV answers by more, less or otherwise than expected, stop after \
             the first move and agree on the next one anew."
                .to_owned(),
        ),
        Size::ToAgree {
            because: NotProposed::Protective,
        } => None,
        Size::ToAgree { .. } => Some(
            "No size of the moves is proposed, since gain and noise are not both known. Begin with the smallest move \
             that shows on the trend, and go no further than agreed."
                .to_owned(),
        ),
    }
}
