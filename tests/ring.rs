//! The ring after a spark against a general circuit simulator; see `data/circuit-timing.md`.

use gaptone::bench::{Bench, Quantity, parse};
use gaptone::model::ring::{Network, Readings, burst, read_off};
use gaptone::predict::predict;
use std::collections::HashMap;
use std::f64::consts::PI;

/// Agreement with the eigenvalues of the same linear network, which are printed to five digits.
const EIGENVALUES: f64 = 2e-5;
/// Agreement of the frequency with the simulated one from all peaks: the gap that opens at the end shifts the last of them.
const FREQUENCY: f64 = 5e-3;
/// Agreement of the quality with that from all peaks.
const QUALITY: f64 = 1e-2;
/// Agreement after the gap has opened: few peaks are left.
const AFTER_OPENING: f64 = 1e-2;

struct Case {
    values: HashMap<String, f64>,
}

impl Case {
    fn get(&self, name: &str) -> f64 {
        self.values[name]
    }

    fn network(&self) -> Network {
        Network {
            capacitance_f: self.get("C_F"),
            inductance_h: self.get("L_H"),
            coil_ohm: self.get("R_L_ohm"),
            lead_h: self.get("L_lead_H"),
            spark_ohm: self.get("R_gap_ohm"),
            parallel_f: self.get("C2_F"),
        }
    }
}

fn case(name: &str) -> Case {
    let mut lines = include_str!("data/ring-summary.csv").lines();
    let names: Vec<&str> = lines.next().unwrap().split(',').collect();
    let row = lines.map(|line| line.split(',').collect::<Vec<_>>()).find(|row| row[0] == name).expect("a case");
    let number = |text: &str| text.parse().unwrap_or(f64::NAN);
    Case { values: names.iter().zip(row).map(|(key, text)| ((*key).to_owned(), number(text))).collect() }
}

/// Positive peaks of the coil current in A while the gap conducts, and the mean time between them in s.
fn peaks(name: &str, until_us: f64) -> (Vec<f64>, f64) {
    let rows = include_str!("data/ring-peaks.csv").lines().map(|line| line.split(',').collect::<Vec<_>>());
    let points: Vec<(f64, f64)> = rows
        .filter(|row| row[0] == name)
        .map(|row| (row[2].parse().unwrap(), row[3].parse().unwrap()))
        .filter(|(t_us, current): &(f64, f64)| *current > 0.0 && *t_us < until_us)
        .collect();
    let spacing = (points[points.len() - 1].0 - points[0].0) / (points.len() - 1) as f64;
    (points.iter().map(|point| point.1).collect(), 1e-6 * spacing)
}

fn read(name: &str, most: usize) -> Readings {
    let opens = case(name).get("gap_opens_us");
    let (mut values, spacing) = peaks(name, if opens.is_nan() { f64::INFINITY } else { opens });
    values.truncate(most);
    let quantities: Vec<Quantity> = values.into_iter().map(Quantity::exact).collect();
    read_off(&quantities, Quantity::exact(spacing)).unwrap()
}

const PLAIN: [&str; 5] = ["s18q8", "s18q14", "s35q20", "p18q12", "p35q10"];

fn near(found: f64, expected: f64, relative: f64) -> bool {
    (found / expected - 1.0).abs() < relative
}

#[test]
fn frequency_and_quality_from_the_parts_are_those_of_the_simulated_ring() {
    for name in PLAIN {
        let (case, modes) = (case(name), case(name).network().closed());
        let mode = modes[0];
        // The table's Q of the eigenvalues is π over the decrement; its network has the stray capacitance of the gap too.
        assert!(near(mode.ring_hz, 1e6 * case.get("f_eig_MHz"), EIGENVALUES), "{name}: {mode:?}");
        assert!(near(PI / mode.decrement(), case.get("Q_eig"), 5e-4), "{name}: {mode:?}");
        assert!(near(mode.ring_hz, 1e6 * case.get("f_closed_MHz"), FREQUENCY), "{name}: {mode:?}");
        assert!(near(mode.quality(), case.get("Q_all"), QUALITY), "{name}: {mode:?}");
        assert_eq!(modes.len(), if name.starts_with('p') { 2 } else { 1 }, "{name}: {modes:?}");
    }
}

#[test]
fn the_simple_formula_is_two_percent_high_where_the_leads_carry_the_current() {
    for (name, off) in [("p18q12", 0.025), ("p35q10", 0.016)] {
        let network = case(name).network();
        let simple = network.simple_hz();
        assert!(near(simple, 1e6 * case(name).get("f_simple_MHz"), 1e-4), "{name}");
        assert!((simple / network.closed()[0].ring_hz - 1.0 - off).abs() < 0.002, "{name}");
    }
}

#[test]
fn after_the_gap_has_opened_coil_and_tank_capacitor_ring_alone() {
    let quenched = case("pquench");
    let open = quenched.network().open().unwrap();
    assert!(near(open.ring_hz, 1e6 * quenched.get("f_open_MHz"), AFTER_OPENING), "{open:?}");
    assert!(near(open.quality(), quenched.get("Q_open"), AFTER_OPENING), "{open:?}");
    for name in ["p18q12", "p35q10", "pquench"] {
        let (case, open) = (case(name), case(name).network().open().unwrap());
        assert!(near(open.ring_hz, 1e6 * case.get("f_open_eig_MHz"), EIGENVALUES), "{name}: {open:?}");
    }
    assert_eq!(case("s18q8").network().open(), None);
}

#[test]
fn quality_read_off_the_peaks_is_that_of_the_ring() {
    for name in ["s18q8", "s18q14", "s35q20"] {
        let found = read(name, 6);
        assert_eq!((found.cycles, found.arc), (5, None), "{name}");
        assert!(near(found.quality(), case(name).get("Q_all"), QUALITY), "{name}: {found:?}");
        assert!(near(found.ring_hz, 1e6 * case(name).get("f_closed_MHz"), FREQUENCY), "{name}: {found:?}");
        let off = (found.quality() - case(name).network().closed()[0].quality()).abs();
        assert!(off < 2.0 * found.u_quality(), "{name}: {found:?}");
    }
}

#[test]
fn an_arc_is_recognised_from_its_peaks_and_nothing_else_is() {
    for name in ["s18arc", "s35arc"] {
        for count in [4, 5] {
            let found = read(name, count);
            let arc = found.arc.unwrap_or_else(|| panic!("{name}: {found:?}"));
            // Without the arc the circuit is that of the linear network.
            assert!(near(arc.quality.unwrap(), case(name).get("Q_eig"), 0.1), "{name}: {arc:?}");
        }
    }
    for name in ["s18q8", "s18q14", "s35q20", "p18q12", "p35q10", "s18grow", "pquench"] {
        for count in [3, 4, 6, 10] {
            assert_eq!(read(name, count).arc, None, "{name} {count}");
        }
    }
}

#[test]
fn an_arc_goes_out_after_the_simulated_number_of_half_cycles() {
    for name in ["s18arc", "s35arc"] {
        let case = case(name);
        let count = case.network().arc_half_cycles(case.get("Vb_V"), case.get("arc_drop_V")).unwrap();
        // One peak a half cycle; the last may be a stub.
        assert!((f64::from(count) - case.get("n_peaks")).abs() <= 1.0, "{name}: {count}");
    }
}

fn bench(text: &str) -> Bench {
    parse(text, "test.toml").unwrap_or_else(|error| panic!("{error}"))
}

#[test]
fn a_prediction_tells_every_mode_and_how_many_cycles_were_read() {
    let parts = bench(
        "supply.voltage = \"5 kV\"\ngap.voltage = \"2870 V\"\ngap.spark_resistance = \"0.3 ohm\"\n\
         charging.resistance = \"1.2 MΩ\"\ncharging.capacitance = \"6.8 nF\"\ntank.inductance = \"1.1 uH\"\n\
         tank.capacitance = \"270 pF\"\ntank.resistance = \"0.72 ohm\"\ntank.lead_inductance = \"60 nH\"\n\
         receiver.tuned = \"1.7 MHz\"\n",
    );
    let found = predict(&parts, None).unwrap().burst.unwrap();
    assert!(near(found.ring_hz, 1.759_69e6, FREQUENCY) && near(found.quality, 12.763, QUALITY), "{found:?}");
    assert!(near(found.bandwidth_hz, found.ring_hz / found.quality, 1e-2));
    let said = found.words().join("\n");
    for part in ["the leads ring", "after the gap has opened", "would say 1.80", "at its tuned frequency"] {
        assert!(said.contains(part), "{part}: {said}");
    }
    let read = bench("tank.peaks = [\"240 V\", \"170 V\", \"121 V\", \"85 V\"]\ntank.peak_spacing = \"0.55 us\"\n");
    let said = predict(&read, None).unwrap().burst.unwrap().words().join("\n");
    assert!(said.contains("read off 4 peaks, which span 3 cycles"), "{said}");
    let line = bench("tank.peaks = [\"240 V\", \"180 V\", \"120 V\", \"60 V\"]\ntank.peak_spacing = \"0.55 us\"\n");
    let said = predict(&line, None).unwrap().burst.unwrap().words().join("\n");
    assert!(said.contains("along a line"), "{said}");
}

#[test]
fn a_tank_that_does_not_ring_is_told_and_the_rest_is_there() {
    let dead = bench(
        "supply.voltage = \"8 kV\"\ngap.voltage = \"5 kV\"\ncharging.time_constant = \"10 ms\"\ntank.frequency = \"1 MHz\"\ntank.quality = 0.4\n",
    );
    let found = predict(&dead, None).unwrap();
    assert!(found.burst.is_none() && found.period_s.is_some());
    assert!(found.notes.iter().any(|note| note.contains("does not ring")), "{:?}", found.notes);
    assert!(burst(&dead).is_err());
}
