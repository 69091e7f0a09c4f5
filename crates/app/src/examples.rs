//! Starting designs, one for each kind of work. All data are invented.

use evenfall_engine::design::{
    Capacitance, Capacitor, Coil, Design, Device, Diode, Feed, Fitted, Limits, Load, StageChoice,
};
use evenfall_engine::exchange::link;

/// Each with a title for the list.
pub(crate) fn all() -> Vec<(&'static str, Design)> {
    vec![
        ("HF generator on a board, 13.56 MHz 60 W", generator()),
        ("Transmitter on a chip, 433.92 MHz (single-ended)", chip()),
        ("Energy to a moving coil, 6.78 MHz 10 W", moving_coil()),
        ("Wide band, 7.0 to 7.3 MHz", wide_band()),
        ("A board that misbehaves", misbehaving()),
    ]
}

fn generator() -> Design {
    let mut d = link::base();
    d.name = "bench generator".into();
    d.brief.limits = Limits {
        efficiency: Some(0.85),
        junction_c: Some(125.0),
        harmonic_dbc: Some(-20.0),
        ..Limits::default()
    };
    d.device = Device {
        on_resistance_ohm: 0.12,
        capacitance: Capacitance::Constant { c_f: 90e-12 },
        diode: Some(Diode {
            forward_v: 0.8,
            slope_ohm: 0.05,
        }),
        rating_v: Some(220.0),
        rating_a: Some(15.0),
        on_resistance_per_k: Some(0.007),
        fall_time_s: Some(2e-9),
        junction_to_ambient_k_per_w: Some(20.0),
        gate_charge_c: Some(12e-9),
        gate_drive_v: Some(10.0),
        ..Device::default()
    };
    d.stage = StageChoice {
        coil_q: Some(200.0),
        capacitor_q: Some(1000.0),
        ..StageChoice::default()
    };
    d.stage.feed = Feed::Choke {
        reactance_ratio: 10.0,
    };
    d
}

fn chip() -> Design {
    let mut d = link::base();
    d.name = "chip transmitter".into();
    d.brief.carrier_hz = 433.92e6;
    d.brief.power_w = Some(0.1);
    d.brief.supply_v = Some(1.2);
    d.brief.limits = Limits {
        drain_fraction_of_rating: 1.0,
        efficiency: Some(0.5),
        ..Limits::default()
    };
    d.device = Device {
        on_resistance_ohm: 0.4,
        capacitance: Capacitance::Constant { c_f: 2.5e-12 },
        rating_v: Some(5.0),
        ..Device::default()
    };
    d.stage = StageChoice {
        loaded_q: 3.0,
        coil_q: Some(14.0),
        capacitor_q: Some(60.0),
        ..StageChoice::default()
    };
    d.stage.feed = Feed::Resonant { q: 1.412 };
    d
}

fn moving_coil() -> Design {
    let mut d = link::base();
    d.name = "moving coil feeder".into();
    d.brief.carrier_hz = 6.78e6;
    d.brief.power_w = Some(10.0);
    d.brief.supply_v = Some(24.0);
    d.brief.limits = Limits {
        efficiency: Some(0.85),
        ..Limits::default()
    };
    d.device = Device {
        on_resistance_ohm: 0.09,
        capacitance: Capacitance::Constant { c_f: 110e-12 },
        diode: Some(Diode {
            forward_v: 0.7,
            slope_ohm: 0.06,
        }),
        rating_v: Some(120.0),
        rating_a: Some(8.0),
        ..Device::default()
    };
    d.stage = StageChoice {
        loaded_q: 5.0,
        coil_q: Some(150.0),
        capacitor_q: Some(1200.0),
        ..StageChoice::default()
    };
    d.stage.feed = Feed::Resonant { q: 1.2915 };
    d
}

fn wide_band() -> Design {
    let mut d = link::base();
    d.name = "forty metre amplifier".into();
    d.brief.carrier_hz = 7.15e6;
    d.brief.band_hz = Some([7.0e6, 7.3e6]);
    d.brief.power_w = Some(25.0);
    d.brief.supply_v = Some(13.8);
    d.brief.limits = Limits {
        efficiency: Some(0.85),
        harmonic_dbc: Some(-43.0),
        ..Limits::default()
    };
    d.device = Device {
        on_resistance_ohm: 0.03,
        capacitance: Capacitance::Constant { c_f: 300e-12 },
        diode: Some(Diode {
            forward_v: 0.8,
            slope_ohm: 0.03,
        }),
        rating_v: Some(80.0),
        rating_a: Some(20.0),
        ..Device::default()
    };
    d.stage = StageChoice {
        loaded_q: 2.5,
        coil_q: Some(180.0),
        capacitor_q: Some(1000.0),
        ..StageChoice::default()
    };
    d
}

fn misbehaving() -> Design {
    let mut d = generator();
    d.name = "board that runs hot".into();
    d.fitted = Fitted {
        feed: Some(Coil {
            l_h: 2.2e-6,
            esr_ohm: None,
        }),
        shunt: Some(Capacitor {
            c_f: 39e-12,
            esr_ohm: None,
        }),
        series_coil: Some(Coil {
            l_h: 1.5e-6,
            esr_ohm: None,
        }),
        series_capacitor: Some(Capacitor {
            c_f: 100e-12,
            esr_ohm: None,
        }),
        drain_load: Some(Load {
            r_ohm: 27.0,
            x_ohm: 0.0,
        }),
    };
    d
}
