//! Quantities: what people write, what is refused, and printing by the SI Brochure.

use std::sync::Arc;

use qsheaf::quantity::{self, Dimension, Kind, Origin, iec60062, iec60063};
use qsheaf::source::Place;

fn place() -> Place {
    let file: Arc<str> = "note.md".into();
    Place::new(&file, 3, 9, 0)
}

fn read(text: &str) -> Result<(f64, f64, f64, String), String> {
    quantity::parse(text, &place())
        .map(|q| (q.spread.low, q.spread.nominal, q.spread.high, q.unit.symbol))
        .map_err(|d| {
            let near = d.nearest.map_or(String::new(), |near| format!(" ({near}?)"));
            format!("{}: {}{near}", d.place.unwrap().column, d.message)
        })
}

#[track_caller]
fn reads(text: &str, low: f64, nominal: f64, high: f64, unit: &str) {
    let (l, n, h, u) = read(text).unwrap_or_else(|e| panic!("{text}: {e}"));
    let near = |a: f64, b: f64| (a - b).abs() <= 1e-12 * b.abs().max(1e-15);
    assert!(near(l, low) && near(n, nominal) && near(h, high) && u == unit, "{text}: {l} {n} {h} {u}");
}

#[test]
fn values_read_as_people_write_them() {
    reads("24 V ± 10 %", 21.6, 24.0, 26.4, "V");
    reads("4.7 kΩ ± 1 %", 4653.0, 4700.0, 4747.0, "kΩ");
    reads("4.7 kohm +/- 1%", 4653.0, 4700.0, 4747.0, "kΩ");
    reads("10.8 to 14.8 V, usually 12.6 V", 10.8, 12.6, 14.8, "V");
    reads("-25 to 70 °C", 248.15, 295.65, 343.15, "°C");
    reads("-20 to 50 degC, usually 25 degC", 253.15, 298.15, 323.15, "°C");
    reads("90 to 450", 90.0, 270.0, 450.0, "");
    reads("2.2 mV/K", 2.2e-3, 2.2e-3, 2.2e-3, "mV/K");
    reads("2.2 mV/°C", 2.2e-3, 2.2e-3, 2.2e-3, "mV/K");
    reads("5 V +10 % -5 %", 4.75, 5.0, 5.5, "V");
    reads("5 V +0.5 V/-0.2 V", 4.8, 5.0, 5.5, "V");
    reads("25 °C ± 5 °C", 293.15, 298.15, 303.15, "°C");
    reads("25 °C ± 5 K", 293.15, 298.15, 303.15, "°C");
    reads("500 mV to 2 V", 0.5, 1.25, 2.0, "V");
    reads("100 uF ± 20 %", 80e-6, 100e-6, 120e-6, "µF");
    reads("12V", 12.0, 12.0, 12.0, "V");
    reads("1e-3 A", 1e-3, 1e-3, 1e-3, "A");
    reads("−3 V", -3.0, -3.0, -3.0, "V");
    reads("200 K/W", 200.0, 200.0, 200.0, "K/W");
    reads("50 ppm/K", 50e-6, 50e-6, 50e-6, "ppm/K");
    reads("75 %", 0.75, 0.75, 0.75, "%");
    reads("75 % ± 5 %", 0.7, 0.75, 0.8, "%");
    reads("40 dB", 100.0, 100.0, 100.0, "dB");
    reads("4k7", 4700.0, 4700.0, 4700.0, "kΩ");
    reads("4k7 ± 1 %", 4653.0, 4700.0, 4747.0, "kΩ");
    reads("R47", 0.47, 0.47, 0.47, "mΩ");
    reads("4R7J", 4.465, 4.7, 4.935, "Ω");
    reads("100n", 100e-9, 100e-9, 100e-9, "nF");
    reads("2M2", 2.2e6, 2.2e6, 2.2e6, "MΩ");
    reads("90 min", 5400.0, 5400.0, 5400.0, "min");
}

#[test]
fn what_is_not_understood_is_an_error_at_its_place() {
    for (text, expected) in [
        ("12 Vo", "12: `Vo` is no unit (V?)"),
        ("12 mv", "12: `mv` is no unit (mV?)"),
        ("abc", "9: `abc` is no number"),
        ("", "9: a value is missing"),
        ("5 to 3 V", "9: the low end lies above the high end"),
        ("1 to 3 V, usually 4 V", "27: the usual value lies outside the range"),
        ("5 V ± 3 A", "15: `A` and `V` do not go together"),
        ("5 V ± 3", "15: the tolerance has no unit"),
        ("5 V or so", "13: `or so` is not understood here"),
        ("5 V +10 %", "18: the lower tolerance is missing"),
        ("1 V to 3 A", "9: `V` and `A` do not go together"),
        ("25 °C ± 5 %", "17: a relative tolerance of a temperature says nothing"),
        ("1e999 V", "9: `1e999` is not a finite number"),
        ("5 V ± -3 V", "15: a tolerance is not negative"),
    ] {
        assert_eq!(read(text).unwrap_err(), expected, "{text}");
    }
    assert!(quantity::parse_as("3 A", &place(), Kind::of(Dimension::OHM)).is_err());
}

/// The 273.15 K between the scales never enter a difference (SI Brochure, 9th edition, 2.3.1).
#[test]
fn temperature_offsets_do_not_corrupt_differences() {
    let q = quantity::parse("25 °C ± 5 °C", &place()).unwrap();
    assert_eq!(q.kind, Kind::TEMPERATURE);
    assert!((q.spread.high - q.spread.low - 10.0).abs() < 1e-12);
    let d = quantity::parse("40 K", &place()).unwrap();
    assert_eq!(d.kind, Kind::of(Dimension::KELVIN));
    assert_eq!(quantity::text(40.0, &d.unit, 2), "40\u{a0}K");
    assert_eq!(quantity::text(398.15, &quantity::preferred_unit(&[], Kind::TEMPERATURE), 3), "125\u{a0}°C");
}

/// SI Brochure, 9th edition, 5.4.3 and 5.4.4; ISO 80000-1:2022, 7.3: examples of setting numbers and units.
#[test]
fn printing_follows_the_si_brochure() {
    let unit = |text: &str| quantity::parse_unit(text).unwrap();
    let t = |si: f64, u: &str, digits: u8| {
        quantity::text(si, &unit(u), digits).replace('\u{a0}', " ").replace('\u{202f}', "_")
    };
    assert_eq!(t(0.0047, "mA", 3), "4.70 mA");
    assert_eq!(t(-0.0047, "mA", 3), "−4.70 mA");
    assert_eq!(t(0.0, "V", 3), "0 V");
    assert_eq!(t(-0.0, "V", 3), "0 V");
    assert_eq!(t(43279.0, "V", 5), "43_279 V");
    assert_eq!(t(3279.0, "V", 4), "3279 V");
    assert_eq!(t(0.75, "%", 2), "75 %");
    assert_eq!(t(30.0 * std::f64::consts::PI / 180.0, "deg", 2), "30°");
    assert_eq!(t(1.5e9, "Ω", 2), "1.5 × 10⁹ Ω");
    assert_eq!(t(123_456.0, "Ω", 2), "120_000 Ω");
    assert_eq!(t(9.999e-3, "mA", 3), "10.0 mA");
    for text in ["mΩ", "kΩ", "MΩ", "µF", "nF", "mH", "µs", "kHz"] {
        assert_eq!(unit(text).symbol, text);
    }
    assert!(quantity::parse_unit("mkΩ").is_none(), "no stacked prefixes");
    assert_eq!(quantity::digits_apart(0.1, 0.1000004, &unit("A"), 3), 7);
}

#[test]
fn one_prefix_serves_a_whole_column() {
    let volt = Kind::of(Dimension::VOLT);
    for (largest, symbol) in
        [(0.02, "mV"), (3.0, "V"), (0.9996, "V"), (2e3, "kV"), (4e-7, "nV"), (4e-6, "µV"), (0.0, "V")]
    {
        assert_eq!(quantity::preferred_unit(&[largest, largest / 1e3], volt).symbol, symbol);
    }
}

#[test]
fn sources_are_told_apart() {
    for (text, origin) in [
        ("data sheet LBN-250 rev C p. 3", Origin::DataSheet),
        ("battery sheet rev 3 p. 4", Origin::DataSheet),
        ("measured 2026-10-02", Origin::Measurement),
        ("IEC 60063", Origin::Standard),
        ("LB-1 clause 3.2", Origin::Specification),
        ("calculated in LB-102", Origin::Calculation),
        ("assumed: like its sister type", Origin::Assumption),
        ("from memory", Origin::Memory),
        ("memory", Origin::Memory),
        ("somebody said so", Origin::Assumption),
    ] {
        assert_eq!(quantity::parse_source(text).origin, origin, "{text}");
    }
}

/// IEC 60063:2015, tables of the E3 to E24 series; E48, E96 and E192 by their generating rule and sample values.
#[test]
fn preferred_numbers_are_those_of_iec_60063() {
    let s = |n| iec60063::series(n).unwrap();
    assert_eq!(s(3), [1.0, 2.2, 4.7]);
    assert_eq!(s(6), [1.0, 1.5, 2.2, 3.3, 4.7, 6.8]);
    assert_eq!(s(12), [1.0, 1.2, 1.5, 1.8, 2.2, 2.7, 3.3, 3.9, 4.7, 5.6, 6.8, 8.2]);
    assert_eq!(s(24).len(), 24);
    assert_eq!(s(24)[9..16], [2.4, 2.7, 3.0, 3.3, 3.6, 3.9, 4.3]);
    assert_eq!(s(48)[..6], [1.0, 1.05, 1.1, 1.15, 1.21, 1.27]);
    assert_eq!(s(96)[..6], [1.0, 1.02, 1.05, 1.07, 1.1, 1.13]);
    assert_eq!(s(192)[..6], [1.0, 1.01, 1.02, 1.04, 1.05, 1.06]);
    assert_eq!((s(96)[95], s(192)[185], s(192)[191]), (9.76, 9.2, 9.88));
    assert!(s(96).iter().all(|v| s(192).contains(v)) && s(48).iter().all(|v| s(96).contains(v)));
    assert!(iec60063::series(7).is_none());
}

/// IEC 60062:2016: examples of marking codes, and the letters for symmetrical relative tolerances.
#[test]
fn marking_codes_are_those_of_iec_60062() {
    for (code, value, dimension) in [
        ("R10", 0.10, Dimension::OHM),
        ("R332", 0.332, Dimension::OHM),
        ("3R32", 3.32, Dimension::OHM),
        ("59R04", 59.04, Dimension::OHM),
        ("590R", 590.0, Dimension::OHM),
        ("3K32", 3320.0, Dimension::OHM),
        ("10K", 10e3, Dimension::OHM),
        ("2M2", 2.2e6, Dimension::OHM),
        ("10G", 10e9, Dimension::OHM),
        ("p10", 0.10e-12, Dimension::FARAD),
        ("3p32", 3.32e-12, Dimension::FARAD),
        ("332p", 332e-12, Dimension::FARAD),
        ("1n0", 1e-9, Dimension::FARAD),
        ("33n2", 33.2e-9, Dimension::FARAD),
        ("µ10", 0.10e-6, Dimension::FARAD),
        ("10µ", 10e-6, Dimension::FARAD),
    ] {
        let (found, of) = iec60062::value(code, None).unwrap_or_else(|| panic!("{code}"));
        assert!((found - value).abs() < 1e-12 * value && of == dimension, "{code}: {found}");
    }
    for (letter, tolerance) in [
        ('B', 0.001),
        ('C', 0.0025),
        ('D', 0.005),
        ('F', 0.01),
        ('G', 0.02),
        ('J', 0.05),
        ('K', 0.1),
        ('M', 0.2),
        ('N', 0.3),
    ] {
        assert_eq!(iec60062::tolerance(letter), Some(tolerance));
    }
    assert!(iec60062::value("4x7", None).is_none() && iec60062::value("47", None).is_none());
}

/// CODATA 2022 (exact since the SI of 2019).
#[test]
fn constants_are_those_of_codata() {
    assert_eq!(qsheaf::device::ELEMENTARY_CHARGE, 1.602176634e-19);
    assert_eq!(qsheaf::device::BOLTZMANN, 1.380649e-23);
    assert!((qsheaf::device::thermal_voltage(300.0) - 0.025_851_999_786).abs() < 1e-11);
}

#[test]
fn random_text_is_never_a_panic() {
    let alphabet = [
        "1", "2.5", " ", "V", "±", "%", "to", "usually", ",", "+", "-", "°C", "k", "4k7", "e", ".", "é", "/",
        "\u{0}", "Ω", "(",
    ];
    let mut seed = 5_u64;
    for _ in 0..20_000 {
        let text: String = (0..10)
            .map(|_| {
                seed = seed.wrapping_mul(6364136223846793005).wrapping_add(1442695040888963407);
                alphabet[(seed >> 33) as usize % alphabet.len()]
            })
            .collect();
        let _ = quantity::parse(&text, &place());
        let _ = quantity::parse_unit(&text);
    }
}
