//! The one table of controller types and settings: the schedule is written from it and the trials run on it.

use crate::controller::{Action, ControllerSpec, Form, IAs, PAs, Settings};

/// One loop's controller.
pub struct Tuning {
    /// Tag.
    pub tag: &'static str,
    /// The controller, with the action that works.
    pub controller: ControllerSpec,
    /// Action as the schedule states it; it differs from the one that works in PIC-211 alone.
    pub action_in_schedule: Action,
    /// Settings before the work, in the controller's own form and units.
    pub found: Settings,
    /// Settings entered after it, the same; none where nothing was entered.
    pub left: Option<Settings>,
}

const fn settings(p: f64, i: f64, d: f64) -> Settings {
    Settings { p, i, d }
}

const fn controller(
    action: Action,
    form: Form,
    p_as: PAs,
    i_as: IAs,
    scan_s: f64,
) -> ControllerSpec {
    ControllerSpec {
        action,
        form,
        p_as,
        i_as,
        d_minutes: false,
        d_filter: 10.0,
        scan_s,
    }
}

const fn row(
    tag: &'static str,
    controller: ControllerSpec,
    found: Settings,
    left: Option<Settings>,
) -> Tuning {
    Tuning {
        tag,
        action_in_schedule: controller.action,
        controller,
        found,
        left,
    }
}

/// As found and as left, loop by loop.
pub const TUNINGS: [Tuning; 12] = {
    use Action::{Direct, Reverse};
    use Form::{Parallel, Series, Standard};
    use IAs::{Minutes, PerMinute, PerSecond, Seconds};
    use PAs::{Band, Gain, GainPerUnit};
    [
        row(
            "FIC-201",
            controller(Reverse, Standard, Gain, PerMinute, 0.5),
            settings(0.25, 4.0, 0.0),
            Some(settings(1.0, 10.7, 0.0)),
        ),
        row(
            "TIC-202",
            controller(Reverse, Standard, Gain, Minutes, 1.0),
            settings(0.9, 20.0, 0.0),
            Some(settings(3.1, 7.6, 0.0)),
        ),
        row(
            "FIC-203",
            controller(Reverse, Series, Band, PerMinute, 0.5),
            settings(110.0, 26.0, 0.0),
            Some(settings(170.0, 19.0, 0.0)),
        ),
        row(
            "LIC-204",
            controller(Direct, Standard, Band, Minutes, 1.0),
            settings(12.0, 0.6, 0.0),
            Some(settings(24.4, 2.7, 0.0)),
        ),
        row(
            "LIC-205",
            controller(Direct, Standard, Gain, Minutes, 1.0),
            settings(3.0, 8.0, 0.0),
            Some(settings(0.88, 42.0, 0.0)),
        ),
        Tuning {
            controller: ControllerSpec {
                d_minutes: true,
                d_filter: 5.0,
                ..controller(Direct, Standard, Gain, Minutes, 0.5)
            },
            ..row(
                "PIC-206",
                controller(Direct, Standard, Gain, Minutes, 0.5),
                settings(1.2, 0.5, 0.0),
                Some(settings(4.1, 0.97, 0.21)),
            )
        },
        row(
            "TIC-207",
            controller(Reverse, Parallel, GainPerUnit, PerMinute, 1.0),
            settings(2.6, 1.6, 0.0),
            Some(settings(1.28, 0.365, 0.0)),
        ),
        row(
            "AIC-208",
            controller(Direct, Standard, Band, Seconds, 5.0),
            settings(200.0, 400.0, 0.0),
            None,
        ),
        row(
            "FIC-209",
            controller(Reverse, Standard, Gain, PerSecond, 15.0),
            settings(0.3, 0.05, 0.0),
            None,
        ),
        row(
            "TIC-210",
            controller(Direct, Standard, Band, Minutes, 1.0),
            settings(40.0, 3.0, 0.0),
            None,
        ),
        Tuning {
            action_in_schedule: Direct,
            ..row(
                "PIC-211",
                controller(Reverse, Series, Gain, Seconds, 0.5),
                settings(0.4, 45.0, 0.0),
                None,
            )
        },
        row(
            "TIC-212",
            controller(Direct, Standard, Gain, Seconds, 1.0),
            settings(0.6, 240.0, 0.0),
            Some(settings(1.9, 80.0, 0.0)),
        ),
    ]
};

/// The row of a tag of this plant.
pub fn tuning(tag: &str) -> &'static Tuning {
    TUNINGS
        .iter()
        .find(|row| row.tag == tag)
        .expect("every loop of the plant has a row in the table")
}
