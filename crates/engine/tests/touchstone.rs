//! Touchstone files (IBIS Open Forum, versions 1.1 and 2.0; rules from memory where the check
//! values do not state them): every format, every refusal, and text that means no good.

use evenfall_engine::exchange::touchstone::{Fault, Point, Touchstone, read};
use num_complex::Complex64;
use proptest::prelude::*;
use std::fmt::Write as _;

#[track_caller]
fn good(text: &str) -> Touchstone {
    read(text).unwrap_or_else(|e| panic!("{e}\n{text}"))
}

#[track_caller]
fn near(got: Complex64, re: f64, im: f64) {
    let gap = (got - Complex64::new(re, im)).norm_sqr().sqrt();
    assert!(gap < 1e-12, "{got} against {re} + {im}j");
}

#[test]
fn every_format_and_unit_of_a_one_port() {
    // 0.6 at 90 degrees.
    let db = 20.0 * libm::log10(0.6);
    for (option, row, hz) in [
        ("#", "1 0.6 90".to_owned(), 1e9),
        ("# MHz S MA R 50", "100.5 0.6 90".to_owned(), 100.5e6),
        ("# ri s KHZ", "7e3\t0 +.6 ! tail".to_owned(), 7e6),
        ("#hz R 50 DB", format!("0 {db} 90"), 0.0),
    ] {
        let t = good(&format!("! head\r\n\n{option} ! said\r\n  {row}\r\n"));
        assert_eq!((t.ports(), t.points().len()), (1, 1));
        assert_eq!(t.points()[0].hz, hz);
        near(t.points()[0].s[0][0], 0.0, 0.6);
    }
    // Only the first option line counts.
    let t = good("# MHz S RI R 75\n1 0 0\n# GHz Z DB\n2 0 0.5");
    assert_eq!((t.reference_ohm()[0], t.points()[1].hz), (75.0, 2e6));
}

#[test]
fn impedances_and_admittances() {
    // Version 1 states them relative to the reference, version 2 as they are.
    for (text, ohm) in [
        ("# Hz Z RI R 50\n1 2 1", (100.0, 50.0)),
        ("# Hz Y RI R 50\n1 0.4 -0.2", (100.0, 50.0)),
        (
            "[Version] 2.0\n# Hz Z RI R 50\n[Number of Ports] 1\n[Number of Frequencies] 1\n\
             [Network Data]\n1 100 50\n[End]",
            (100.0, 50.0),
        ),
        (
            "[Version] 2.0\n# Hz Y RI R 50\n[Number of Ports] 1\n[Number of Frequencies] 1\n\
             [Reference] 20\n[Network Data]\n1 0.008 -0.004\n[End]",
            (100.0, 50.0),
        ),
    ] {
        let z = good(text).impedance_at(1.0).expect("in range");
        assert!((z - Complex64::new(ohm.0, ohm.1)).norm_sqr() < 1e-22, "{z}");
    }
    // A two-port of 10 ohm across: every Z is 10 ohm. S11 = -r/(r + 2 z), S21 = 2 z/(r + 2 z).
    let t = good("# Hz Z RI R 50\n1 .2 0 .2 0 .2 0 .2 0");
    near(t.points()[0].s[0][0], -5.0 / 7.0, 0.0);
    near(t.points()[0].s[1][0], 2.0 / 7.0, 0.0);
    // 10 ohm in the line: y 5, -5 relative to 50 ohm. S11 = 1/11.
    let t = good("# Hz Y RI R 50\n1 5 0 -5 0 -5 0 5 0");
    near(t.points()[0].s[0][0], 1.0 / 11.0, 0.0);
    near(t.points()[0].s[1][0], 10.0 / 11.0, 0.0);
    // The same in version 2, between 50 and 40 ohm: S11 = (50 - 50)/100 = 0.
    let t = good(
        "[Version] 2.0\n# Hz Y RI\n[Number of Ports] 2\n[Two-Port Data Order] 12_21\n\
         [Number of Frequencies] 1\n[Reference] 50\n 40\n[Matrix Format] Upper\n\
         [Network Data]\n1 .1 0 -.1 0 .1 0\n[End]\nanything",
    );
    assert_eq!(t.reference_ohm(), [50.0, 40.0]);
    near(t.points()[0].s[0][0], 0.0, 0.0);
    near(
        t.points()[0].s[1][0],
        2.0 * (50.0_f64 * 40.0).sqrt() / 100.0,
        0.0,
    );
    near(t.points()[0].s[1][1], 0.2, 0.0);
}

const VERSION_2: &str = "! made by hand
[version] 2.0
# mhz S ri R 50
[Number  of Ports] 2
[Two-Port Data Order] 12_21
[Number of Frequencies] 2
[Number of Noise Frequencies] 1
[Begin Information]
[Anything] 1 # !
[End Information]
[Reference] 50
 75 ! the second
[Matrix Format] Full
[Network Data]
1 .11 0 .12 0 .21 0 .22 0
2 .11 1 .12 1 .21 1 .22 1
[Noise Data]
1 2 3 4 5
[End]
";

#[test]
fn order_of_two_ports() {
    let want = [[0.11, 0.12], [0.21, 0.22]];
    let check = |t: &Touchstone| {
        assert_eq!(t.ports(), 2);
        for (row, want) in t.points()[0].s.iter().zip(want) {
            for (c, want) in row.iter().zip(want) {
                near(*c, want, 0.0);
            }
        }
    };
    check(&good(
        "# MHz RI\n1 .11 0 .21 0 .12 0 .22 0\n2 0 0 0 0 0 0 0 0",
    ));
    let t = good(VERSION_2);
    check(&t);
    assert_eq!((t.reference_ohm(), t.points().len()), ([50.0, 75.0], 2));
    check(&good(
        &VERSION_2
            .replace("12_21", "21_12")
            .replace(".12 0 .21 0", ".21 0 .12 0"),
    ));
    // Noise after a version 1 two-port begins at a frequency that is not above the last.
    let t = good("# GHz RI\n1 0 0 0 0 0 0 0 0\n2 0 0 0 0 0 0 0 0\n1 .5 .6 90 .3\n2 1 .6 9 .3\n");
    assert_eq!(t.points().len(), 2);
}

#[test]
fn impedance_between_points() {
    let t = good("# MHz S RI R 50\n10 0 0\n20 0.5 0\n30 1 0");
    let ohm = |mhz: f64| t.impedance_at(mhz * 1e6).map(|z| (z.re, z.im));
    assert_eq!(ohm(10.0), Some((50.0, 0.0)));
    assert_eq!(ohm(20.0), Some((150.0, 0.0)));
    // Halfway between the reflections 0 and 0.5: 50 (1.25/0.75).
    near(
        t.impedance_at(15e6).expect("in range") / 50.0,
        5.0 / 3.0,
        0.0,
    );
    for outside in [9.999, 30.001, f64::NAN, f64::INFINITY, -1.0] {
        assert_eq!(ohm(outside), None);
    }
    // A perfect open has no impedance; a two-port has none either.
    assert_eq!(ohm(30.0), None);
    assert_eq!(good(VERSION_2).impedance_at(1e6), None);
    assert!(good(VERSION_2).scattering_at(1.5e6).is_some());
}

#[test]
fn refusals_name_their_line() {
    let number = |text: &str| Fault::Number { text: text.into() };
    let unknown = |word: &str| Fault::Unknown { word: word.into() };
    let order = |found, wanted| Fault::Order { found, wanted };
    let columns = |found, wanted| Fault::Columns { found, wanted };
    let truncated = |rows, announced| Fault::Truncated { rows, announced };
    let two = "# Hz\n1 0 0 0 0 0 0 0 0\n";
    for (text, line, fault) in [
        ("", 0, truncated(0, 0)),
        ("! nothing\n# GHz\n", 2, truncated(0, 0)),
        ("1 2 3\n# GHz\n", 1, order("data", "the option line")),
        ("hello\n", 1, number("hello")),
        ("# GHz S MA R\n", 1, number("")),
        ("# GHz S MA R 0\n", 1, Fault::Reference { ohm: [0.0; 2] }),
        ("\n# THz\n", 2, unknown("THz")),
        ("# H RI\n", 1, Fault::Unsupported { word: "H".into() }),
        ("# Hz\n1 0\n", 2, columns(2, 3)),
        ("# Hz\n1 0 0\n2 0 0 0\n", 3, columns(4, 3)),
        ("# Hz\n1 0 0 0 0\n", 2, columns(5, 9)),
        ("# Hz\n1 0 0 0 0 0 0 0 0 0 0\n", 2, columns(10, 9)),
        (&format!("{two}2 0 0 0 0 0 0 0"), 3, columns(8, 9)),
        ("# Hz\n1 0 0\n2 0 x\n", 3, number("x")),
        ("# Hz\n1 0 inf\n", 2, number("inf")),
        ("# Hz\n1 0 NaN\n", 2, number("NaN")),
        ("# Hz\n1 0 1e999\n", 2, number("1e999")),
        ("# Hz\n-1 0 0\n", 2, number("-1")),
        ("# Hz DB\n1 1e6 0\n", 2, Fault::NotFinite { hz: 1.0 }),
        ("# Hz Z RI\n1 -1 0\n", 2, Fault::NotFinite { hz: 1.0 }),
        (
            "# kHz\n1 0 0\n1 0 0\n",
            3,
            Fault::NotRising {
                hz: 1e3,
                before_hz: 1e3,
            },
        ),
        (
            "# Hz\n[Number of Ports] 1",
            2,
            order("a keyword", "[Version]"),
        ),
        (
            "# Hz\n[Version] 2.0",
            2,
            order("the option line", "[Version]"),
        ),
        (
            "[Version] 3.1",
            1,
            Fault::Unsupported {
                word: "[version] 3.1".into(),
            },
        ),
        ("[Version 2.0", 1, unknown("[Version 2.0")),
    ] {
        let error = read(text).expect_err(text);
        assert_eq!((error.line, error.fault), (line, fault), "{text}");
    }
    // Version 2: one thing changed at a time.
    for (from, to, line, fault) in [
        (
            "[Number  of Ports] 2",
            "[Number of Ports] 3",
            4,
            Fault::Ports { ports: 3 },
        ),
        (
            "[Number  of Ports] 2",
            "[Number of Ports] two",
            4,
            number("two"),
        ),
        (
            "# mhz S ri R 50\n",
            "",
            3,
            order("[Number of Ports]", "the option line"),
        ),
        (
            "[Two-Port Data Order] 12_21\n",
            "",
            13,
            order("[Network Data]", "[Two-Port Data Order]"),
        ),
        ("12_21", "12_12", 5, unknown("[two-port data order] 12_12")),
        (
            "[Number of Frequencies] 2\n",
            "",
            13,
            order("[Network Data]", "[Number of Frequencies]"),
        ),
        (
            "[Number of Frequencies] 2",
            "[Number of Frequencies] 3",
            19,
            truncated(2, 3),
        ),
        (
            "[Number of Frequencies] 2",
            "[Number of Frequencies] 1",
            16,
            Fault::TooMany { announced: 1 },
        ),
        (
            "[Number of Frequencies] 2",
            "[Number of Frequencies] 0",
            6,
            number("0"),
        ),
        (" 75 ! the second\n", "", 12, columns(1, 2)),
        (" 75 !", " 75 75 !", 12, columns(3, 2)),
        (" 75 !", " -75 !", 12, Fault::Reference { ohm: [-75.0; 2] }),
        ("Full", "Half", 13, unknown("[matrix format] Half")),
        ("[Network Data]\n", "", 14, order("data", "[Network Data]")),
        (
            "[Matrix Format]",
            "[Matrix Shape]",
            13,
            unknown("[matrix shape] Full"),
        ),
        (
            "[Matrix Format] Full",
            "[Mixed-Mode Order] D2,3",
            13,
            Fault::Unsupported {
                word: "[mixed-mode order] D2,3".into(),
            },
        ),
        (
            "[Noise Data]",
            "[Reference] 50",
            17,
            order("[Network Data]", "this keyword"),
        ),
        ("[End]\n", "", 18, truncated(2, 2)),
    ] {
        let text = VERSION_2.replace(from, to);
        assert_ne!(text, VERSION_2);
        let error = read(&text).expect_err(&text);
        assert_eq!((error.line, error.fault), (line, fault), "{text}");
    }
    let error = read("# kHz\n1 0 0\n0.5 0 0\n").expect_err("falling");
    assert_eq!(
        error.to_string(),
        "line 3: 500 Hz does not lie above the 1000 Hz before it"
    );
}

#[test]
fn what_is_written_reads_back() {
    let c = Complex64::new;
    let one = [
        (0.0, c(0.1, -1e-17)),
        (13.56e6, c(1.0 / 3.0, 1e300)),
        (2.5e9, c(-0.0, 0.5)),
    ];
    let one = Touchstone::one_port(75.0, one).expect("a one-port");
    let text = one.write("first\r\nsecond\n").expect("a text");
    assert!(
        text.starts_with("! first\n! second\n# Hz S RI R 75\n0 0.1 -1e-17\n"),
        "{text}"
    );
    assert_eq!(good(&text), one);
    let s = [[c(0.1, 0.2), c(0.3, 0.4)], [c(0.5, 0.6), c(0.7, 0.8)]];
    let points = vec![Point { hz: 1e6, s }, Point { hz: 2e6, s }];
    let two = Touchstone::two_port([50.0; 2], points.clone()).expect("a two-port");
    let text = two.write("").expect("a text");
    assert!(text.contains("1e6 0.1 0.2 0.5 0.6 0.3 0.4 0.7 0.8") || text.contains("1000000 0.1"));
    assert_eq!(good(&text), two);
    let uneven = Touchstone::two_port([50.0, 75.0], points).expect("a two-port");
    let ohm = [50.0, 75.0];
    assert_eq!(
        uneven.write("").expect_err("two references").fault,
        Fault::Reference { ohm }
    );
    for points in [
        vec![],
        vec![(1.0, c(f64::NAN, 0.0))],
        vec![(2.0, c(0.0, 0.0)); 2],
        vec![(-1.0, c(0.0, 0.0))],
    ] {
        assert!(Touchstone::one_port(50.0, points).is_err());
    }
    assert!(Touchstone::one_port(0.0, [(1.0, c(0.0, 0.0))]).is_err());
}

#[test]
fn megabytes_are_read_or_refused_at_once() {
    let mut long = String::from("# Hz S RI R 50\n");
    for k in 0..200_000 {
        let _ = writeln!(long, "{k} 0.123456789 -0.987654321");
    }
    assert_eq!(good(&long).points().len(), 200_000);
    let size = 8_000_000;
    for hostile in [
        "[".repeat(size),
        "]".repeat(size),
        "#".repeat(size),
        "# ".repeat(size),
        format!("# Hz\n{}", "1 ".repeat(size)),
        format!("# Hz\n{}", "1".repeat(size)),
        format!("# Hz\n1 0 0.{}", "0".repeat(size)),
        "\n".repeat(size),
        format!("[{}]", "a ".repeat(size)),
        format!("[Version] 2.0\n[Reference] {}", "5 ".repeat(size)),
        "\u{1F4E1}".repeat(size / 4),
    ] {
        let error = read(&hostile).expect_err("no file");
        assert!(error.to_string().len() < 300);
    }
}

proptest! {
    #[test]
    fn any_text_is_read_or_refused(text in any::<String>()) {
        let _ = read(&text);
    }

    #[test]
    fn any_lines_are_read_or_refused(picks in proptest::collection::vec((0..22_usize, proptest::num::f64::ANY), 0..25)) {
        let mut text = String::new();
        for (pick, number) in picks {
            let _ = match pick {
                0 => writeln!(text, "[Version] 2.0"),
                1 => writeln!(text, "# Hz S RI R 50"),
                2 => writeln!(text, "# GHz Y DB R {number}"),
                3 => writeln!(text, "[Number of Ports] 1"),
                4 => writeln!(text, "[Number of Ports] 2"),
                5 => writeln!(text, "[Two-Port Data Order] 21_12"),
                6 => writeln!(text, "[Number of Frequencies] 2"),
                7 => writeln!(text, "[Reference] {number}"),
                8 => writeln!(text, "[Matrix Format] Lower"),
                9 => writeln!(text, "[Network Data]"),
                10 => writeln!(text, "[Noise Data]"),
                11 => writeln!(text, "[End]"),
                12 => writeln!(text, "[Begin Information]"),
                13 => writeln!(text, "[End Information]"),
                14 => writeln!(text, "{number}"),
                15 => writeln!(text, "1 {number} 0"),
                16 => writeln!(text, "2 0 {number}"),
                17 => writeln!(text, "1 1 2 3 4 5 6 7 {number}"),
                18 => writeln!(text, "2 1 2 3 4 5 {number}"),
                19 => writeln!(text, "1 2 3 4 {number}"),
                20 => writeln!(text, "[] {number} ]"),
                _ => writeln!(text, "! {number}"),
            };
        }
        if let Ok(t) = read(&text) {
            prop_assert!(!t.points().is_empty());
            let _ = (t.impedance_at(1.5), t.scattering_at(1.5), t.write(&text));
        }
    }

    #[test]
    fn any_points_come_back(
        ohm in 1e-3..1e6_f64,
        points in proptest::collection::vec((1e-3..1e9_f64, any::<f64>(), any::<f64>()), 1..20),
    ) {
        let mut hz = 0.0;
        let points = points.into_iter().map(|(step, re, im)| {
            hz += step;
            (hz, Complex64::new(re, im))
        });
        let points: Vec<_> = points.collect();
        let t = Touchstone::one_port(ohm, points).expect("a one-port");
        prop_assert_eq!(read(&t.write("again").expect("a text")), Ok(t));
    }
}
