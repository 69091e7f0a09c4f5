//! Starting designs, one for each kind of work. All data are invented.

use evenfall_engine::design::Design;
use evenfall_engine::exchange::link;

/// Each as a title for the list and a link of version 1, which opens for ever.
pub(crate) const ALL: [(&str, &str); 5] = [
    (
        "HF generator on a board, 13.56 MHz 60 W",
        "e=1&n=bench+generator&le=0.85&lh=-20&lt=125&fr=10&ql=200&qc=1000&ck=constant&c=90e-12&vf=0.8&rf=0.05&ron=0.12&ra=15&rv=220&device.on_resistance_per_k=0.007&device.fall_time_s=2e-9&device.gate_charge_c=12e-9&device.gate_drive_v=10&device.junction_to_ambient_k_per_w=20",
    ),
    (
        "Transmitter on a chip, 433.92 MHz (differential, by width)",
        "e=1&n=chip+transmitter&f=433.92e6&p=0.1&v=1.2&lv=1&le=0.5&q=3&fk=resonant&fq=1.2&ql=14&qc=60&rv=5&stage.form=differential&stage.cross_share=0.5&device.gate_drive_v=1.2&device.per_width.on_resistance_ohm_m=8e-4&device.per_width.output_f_per_m=5e-10&device.per_width.gate_f_per_m=1e-9",
    ),
    (
        "Energy to a moving coil, 6.78 MHz 10 W",
        "e=1&n=moving+coil+feeder&f=6.78e6&p=10&v=24&le=0.85&q=5&fk=resonant&fq=1.2915&ql=150&qc=1200&ck=constant&c=110e-12&vf=0.7&rf=0.06&ron=0.09&ra=8&rv=120",
    ),
    (
        "Wide band, 7.0 to 7.3 MHz",
        "e=1&n=forty+metre+amplifier&f=7.15e6&f1=7.0e6&f2=7.3e6&p=25&v=13.8&le=0.85&lh=-43&q=2.5&ql=180&qc=1000&ck=constant&c=300e-12&vf=0.8&rf=0.03&ron=0.03&ra=20&rv=80",
    ),
    (
        "A board that misbehaves",
        "e=1&n=board+that+runs+hot&le=0.85&lh=-20&lt=125&fr=10&ql=200&qc=1000&ck=constant&c=90e-12&vf=0.8&rf=0.05&ron=0.12&ra=15&rv=220&device.on_resistance_per_k=0.007&device.fall_time_s=2e-9&device.gate_charge_c=12e-9&device.gate_drive_v=10&device.junction_to_ambient_k_per_w=20&l1=2.2e-6&c1=39e-12&l2=1.5e-6&c2=100e-12&rl=27&xl=0",
    ),
];

/// The design of one of these links.
pub(crate) fn open(link: &str) -> Design {
    link::read(link).0
}

/// The design that a page without an address shows.
pub(crate) fn first() -> Design {
    open(ALL[0].1)
}
