//! The loops of the plant: their true processes, transmitters and logging.

use crate::process::{Curve, ProcessSpec};
use crate::rig::LoopSpec;

/// Feed flow: fast and noisy, 1 % of play in the valve.
pub const FIC201: LoopSpec = LoopSpec {
    tag: "FIC-201",
    pv_low: 0.0,
    pv_high: 40.0,
    process: ProcessSpec {
        curve: Curve {
            centre: 50.0,
            value: 48.0,
            gain: 1.1,
            bend: 0.008,
        },
        dead_band: 1.0,
        dead_time_s: 1.8,
        lags_s: &[5.2, 0.8, 0.4],
        integrating: false,
    },
    noise: 0.16,
    resolution: 0.02,
    refresh_s: 0.5,
    log_s: 1.0,
    tick_s: 0.1,
    wander: (0.04, 120.0),
    start_op: 44.0,
    start_level: 0.0,
};

/// Preheater outlet: three lags behind the steam flow that FIC-203 holds; the curve is given the flow.
pub const TIC202: LoopSpec = LoopSpec {
    tag: "TIC-202",
    pv_low: 0.0,
    pv_high: 200.0,
    process: ProcessSpec {
        curve: Curve {
            centre: 45.0,
            value: 52.0,
            gain: 0.9,
            bend: -0.006,
        },
        dead_band: 0.0,
        dead_time_s: 15.0,
        lags_s: &[420.0, 60.0, 25.0],
        integrating: false,
    },
    noise: 0.09,
    resolution: 0.025,
    refresh_s: 1.0,
    log_s: 5.0,
    tick_s: 0.1,
    wander: (0.03, 3000.0),
    start_op: 45.0,
    start_level: 0.0,
};

/// Heating steam flow: the inner loop.
pub const FIC203: LoopSpec = LoopSpec {
    tag: "FIC-203",
    pv_low: 0.0,
    pv_high: 1500.0,
    process: ProcessSpec {
        curve: Curve {
            centre: 45.0,
            value: 42.0,
            gain: 1.3,
            bend: 0.01,
        },
        dead_band: 0.2,
        dead_time_s: 0.9,
        lags_s: &[2.8, 0.6, 0.3],
        integrating: false,
    },
    noise: 0.12,
    resolution: 0.02,
    refresh_s: 0.5,
    log_s: 0.5,
    tick_s: 0.1,
    wander: (0.03, 60.0),
    start_op: 42.0,
    start_level: 0.0,
};

/// Column sump: a level that the bottoms valve draws down.
pub const LIC204: LoopSpec = LoopSpec {
    tag: "LIC-204",
    pv_low: 0.0,
    pv_high: 100.0,
    process: ProcessSpec {
        curve: Curve {
            centre: 48.0,
            value: 0.0,
            gain: -0.006,
            bend: 0.006,
        },
        dead_band: 0.1,
        dead_time_s: 6.0,
        lags_s: &[8.0, 2.0],
        integrating: true,
    },
    noise: 0.12,
    resolution: 0.05,
    refresh_s: 1.0,
    log_s: 2.0,
    tick_s: 0.5,
    wander: (0.015, 600.0),
    start_op: 48.0,
    start_level: 50.0,
};

/// Surge drum: a large level behind the discharge valve.
pub const LIC205: LoopSpec = LoopSpec {
    tag: "LIC-205",
    pv_low: 0.0,
    pv_high: 2400.0,
    process: ProcessSpec {
        curve: Curve {
            centre: 55.0,
            value: 0.0,
            gain: -0.0018,
            bend: 0.004,
        },
        dead_band: 0.1,
        dead_time_s: 10.0,
        lags_s: &[12.0, 3.0],
        integrating: true,
    },
    noise: 0.06,
    resolution: 0.02,
    refresh_s: 1.0,
    log_s: 2.0,
    tick_s: 0.5,
    wander: (0.02, 900.0),
    start_op: 55.0,
    start_level: 52.0,
};

/// Column head pressure: two clear lags, a quiet transmitter.
pub const PIC206: LoopSpec = LoopSpec {
    tag: "PIC-206",
    pv_low: 0.0,
    pv_high: 250.0,
    process: ProcessSpec {
        curve: Curve {
            centre: 55.0,
            value: 44.0,
            gain: -0.8,
            bend: -0.005,
        },
        dead_band: 0.15,
        dead_time_s: 4.0,
        lags_s: &[40.0, 18.0, 1.5],
        integrating: false,
    },
    noise: 0.012,
    resolution: 0.004,
    refresh_s: 0.5,
    log_s: 2.0,
    tick_s: 0.1,
    wander: (0.008, 900.0),
    start_op: 55.0,
    start_level: 0.0,
};

/// Tray temperature: the gain doubles from one end of the steps to the other.
pub const TIC207: LoopSpec = LoopSpec {
    tag: "TIC-207",
    pv_low: 40.0,
    pv_high: 160.0,
    process: ProcessSpec {
        curve: Curve {
            centre: 38.0,
            value: 40.0,
            gain: 0.55,
            bend: 0.062,
        },
        dead_band: 0.2,
        dead_time_s: 20.0,
        lags_s: &[180.0, 50.0, 20.0],
        integrating: false,
    },
    noise: 0.09,
    resolution: 0.02,
    refresh_s: 1.0,
    log_s: 5.0,
    tick_s: 0.5,
    wander: (0.03, 2000.0),
    start_op: 35.0,
    start_level: 0.0,
};

/// Product water content: 240 s of sample line and analysis, a new value every 30 s.
pub const AIC208: LoopSpec = LoopSpec {
    tag: "AIC-208",
    pv_low: 0.0,
    pv_high: 500.0,
    process: ProcessSpec {
        curve: Curve {
            centre: 50.0,
            value: 45.0,
            gain: -1.2,
            bend: 0.004,
        },
        dead_band: 0.2,
        dead_time_s: 240.0,
        lags_s: &[150.0, 25.0, 10.0],
        integrating: false,
    },
    noise: 0.15,
    resolution: 0.02,
    refresh_s: 30.0,
    log_s: 10.0,
    tick_s: 1.0,
    wander: (0.05, 3000.0),
    start_op: 50.0,
    start_level: 0.0,
};

/// Reflux flow: a time constant of 2 s on a controller of 15 s.
pub const FIC209: LoopSpec = LoopSpec {
    tag: "FIC-209",
    pv_low: 0.0,
    pv_high: 25.0,
    process: ProcessSpec {
        curve: Curve {
            centre: 50.0,
            value: 46.0,
            gain: 1.2,
            bend: 0.008,
        },
        dead_band: 0.3,
        dead_time_s: 0.8,
        lags_s: &[2.0, 0.3, 0.2],
        integrating: false,
    },
    noise: 0.15,
    resolution: 0.02,
    refresh_s: 0.5,
    log_s: 0.5,
    tick_s: 0.05,
    wander: (0.03, 120.0),
    start_op: 46.0,
    start_level: 0.0,
};

/// Cooler outlet: the water valve nearly open, where it does little.
pub const TIC210: LoopSpec = LoopSpec {
    tag: "TIC-210",
    pv_low: 0.0,
    pv_high: 100.0,
    process: ProcessSpec {
        curve: Curve {
            centre: 92.0,
            value: 38.0,
            gain: -0.35,
            bend: -0.03,
        },
        dead_band: 0.3,
        dead_time_s: 8.0,
        lags_s: &[45.0, 15.0, 6.0],
        integrating: false,
    },
    noise: 0.25,
    resolution: 0.1,
    refresh_s: 1.0,
    log_s: 2.0,
    tick_s: 0.5,
    wander: (0.08, 600.0),
    start_op: 90.0,
    start_level: 0.0,
};

/// Vacuum: the bleed valve lifts the pressure, so only a reverse-acting controller can work.
pub const PIC211: LoopSpec = LoopSpec {
    tag: "PIC-211",
    pv_low: 0.0,
    pv_high: 200.0,
    process: ProcessSpec {
        curve: Curve {
            centre: 40.0,
            value: 35.0,
            gain: 0.9,
            bend: 0.01,
        },
        dead_band: 0.2,
        dead_time_s: 3.0,
        lags_s: &[22.0, 8.0, 3.0],
        integrating: false,
    },
    noise: 0.1,
    resolution: 0.025,
    refresh_s: 0.5,
    log_s: 1.0,
    tick_s: 0.1,
    wander: (0.03, 400.0),
    start_op: 40.0,
    start_level: 0.0,
};

/// Vent condenser: sound in its test; in the trial the valve sticks.
pub const TIC212: LoopSpec = LoopSpec {
    tag: "TIC-212",
    pv_low: -20.0,
    pv_high: 60.0,
    process: ProcessSpec {
        curve: Curve {
            centre: 50.0,
            value: 40.0,
            gain: -0.8,
            bend: 0.004,
        },
        dead_band: 0.2,
        dead_time_s: 12.0,
        lags_s: &[90.0, 30.0, 12.0],
        integrating: false,
    },
    noise: 0.1,
    resolution: 0.025,
    refresh_s: 1.0,
    log_s: 5.0,
    tick_s: 0.5,
    wander: (0.03, 1200.0),
    start_op: 50.0,
    start_level: 0.0,
};

/// All of them, in the order of the schedule.
pub const LOOPS: [LoopSpec; 12] = [
    FIC201, TIC202, FIC203, LIC204, LIC205, PIC206, TIC207, AIC208, FIC209, TIC210, PIC211, TIC212,
];

/// The loop as it stands when the trial is made: the column runs in the middle of its range then.
pub fn at_trial(spec: LoopSpec) -> LoopSpec {
    if spec.tag == TIC207.tag {
        LoopSpec {
            start_op: 45.0,
            ..spec
        }
    } else {
        spec
    }
}
