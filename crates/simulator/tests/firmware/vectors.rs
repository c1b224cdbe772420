//! The frozen vectors of protocol version 1, run by the C side as their README says.

use std::fs;
use std::path::PathBuf;

use quantity::{Current, Resistance, SinkTime, Span, Temperature, Voltage};
use serde::Deserialize;
use simulator::firmware::{Firmware, FirmwareConfig, Sample};
use wire::{Abilities, Reset, TemperatureReading, checksum};

use crate::bench::{Bench, line};

fn read<T: for<'de> Deserialize<'de>>(file: &str) -> T {
    let path = PathBuf::from(env!("CARGO_MANIFEST_DIR"))
        .join("../../firmware-protocol/vectors/v1")
        .join(file);
    let text = fs::read_to_string(&path).unwrap_or_else(|e| panic!("{}: {e}", path.display()));
    serde_json::from_str(&text).unwrap_or_else(|e| panic!("{}: {e}", path.display()))
}

#[derive(Deserialize)]
struct Lines<T> {
    lines: Vec<T>,
}

#[derive(Deserialize)]
struct Good {
    line: String,
    kind: String,
}

#[derive(Deserialize)]
struct Bad {
    line: String,
    class: String,
    why: String,
}

/// What a fresh sink answers to one line, and how many lines it then counts as damaged.
fn answer(text: &str) -> (Vec<String>, i128) {
    let mut bench = Bench::cold();
    bench.raw(format!("{text}\n").as_bytes());
    let answers = bench.heard();
    bench.say("hello 2 99");
    bench.must("readback", "20000");
    (answers, bench.readback().0[6])
}

#[test]
fn every_good_host_line_is_taken_as_its_kind() {
    for good in read::<Lines<Good>>("host-lines.json").lines {
        let (answers, damaged) = answer(&good.line);
        assert_eq!(damaged, 0, "{}", good.line);
        let number = good.line.split(' ').nth(1).unwrap();
        match good.kind.as_str() {
            "hello" => assert_eq!(answers.len(), 5, "{}", good.line),
            "clock" => assert_eq!(answers, [format!("clock {number} 0")]),
            "off" => assert_eq!(answers, [format!("ok {number} off")]),
            _ => assert_eq!(answers, [format!("no {number} session")], "{}", good.line),
        }
    }
}

#[test]
fn every_bad_host_line_is_counted_and_faulty_ones_are_refused() {
    for bad in read::<Lines<Bad>>("bad-host-lines.json").lines {
        let (answers, damaged) = answer(&bad.line);
        assert_eq!(damaged, 1, "{}: {}", bad.why, bad.line);
        match bad.class.as_str() {
            "damaged" => assert!(answers.is_empty(), "{}: {answers:?}", bad.why),
            "faulty" => {
                assert_eq!(answers.len(), 1, "{}: {answers:?}", bad.why);
                assert!(answers[0].starts_with("no "), "{}: {answers:?}", bad.why);
            }
            class => panic!("unknown class {class}"),
        }
    }
}

#[derive(Deserialize)]
struct Dialogues {
    sink: Sink,
    dialogues: Vec<Dialogue>,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct Sink {
    serial: u32,
    tick_us: u64,
    queue_depth: u16,
    fastest_readback_us: u64,
    burst_samples: u16,
    abilities: u8,
    drive_bits: u8,
    drive_full_scale_uv: i64,
    drive_span: u8,
    sense_resistor_uohm: i64,
    sense_bits: u8,
    sense_current_ua: i64,
    sense_voltage_uv: i64,
}

#[derive(Deserialize)]
struct Dialogue {
    name: String,
    reset: String,
    sample: SampleText,
    entries: Vec<Entry>,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct Entry {
    at_us: u64,
    sample: Option<SampleText>,
    host: Option<String>,
    #[serde(default)]
    sink: Vec<String>,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct SampleText {
    current_code: u16,
    voltage_code: u16,
    temperature_mc: i64,
    sensor: String,
}

impl Sink {
    fn config(&self) -> FirmwareConfig {
        FirmwareConfig {
            serial: self.serial,
            tick: Span::from_micros(self.tick_us),
            queue: self.queue_depth,
            fastest_readback: Span::from_micros(self.fastest_readback_us),
            burst: self.burst_samples,
            abilities: Abilities {
                power: self.abilities & 1 != 0,
                resistance: self.abilities & 2 != 0,
                burst: self.abilities & 4 != 0,
                isolator: self.abilities & 8 != 0,
            },
            drive_bits: self.drive_bits,
            drive_full_scale: Voltage::from_microvolts(self.drive_full_scale_uv),
            drive_spans_full_scale: self.drive_span == 1,
            sense_resistor: Resistance::from_microohms(self.sense_resistor_uohm),
            sense_bits: self.sense_bits,
            sense_current: Current::from_microamperes(self.sense_current_ua),
            sense_voltage: Voltage::from_microvolts(self.sense_voltage_uv),
        }
    }
}

fn reset(word: &str) -> Reset {
    match word {
        "power" => Reset::Power,
        "pin" => Reset::Pin,
        "watchdog" => Reset::Watchdog,
        "software" => Reset::Software,
        "unknown" => Reset::Unknown,
        _ => panic!("unknown reset reason {word}"),
    }
}

fn sample(text: &SampleText) -> Sample {
    let temperature = match text.sensor.as_str() {
        "good" => {
            TemperatureReading::Value(Temperature::from_millidegrees_celsius(text.temperature_mc))
        }
        "open" => TemperatureReading::Open,
        "short" => TemperatureReading::Short,
        word => panic!("unknown sensor word {word}"),
    };
    Sample {
        current_code: text.current_code,
        voltage_code: text.voltage_code,
        temperature,
    }
}

/// The line with what the vectors leave open put in place of it.
fn blank(line: &str) -> String {
    let mut fields: Vec<&str> = line.split(' ').collect();
    if fields.first() == Some(&"about") {
        fields[3] = "FIRMWARE";
        *fields.last_mut().unwrap() = "CRC";
    }
    fields.join(" ")
}

#[test]
fn every_dialogue_goes_word_for_word() {
    let file: Dialogues = read("dialogues.json");
    let mut failures = Vec::new();
    for dialogue in &file.dialogues {
        let mut firmware = Firmware::new(file.sink.config(), reset(&dialogue.reset)).unwrap();
        let mut in_force = sample(&dialogue.sample);
        let mut next_tick = 0;
        for entry in &dialogue.entries {
            let mut bytes = Vec::new();
            while next_tick <= entry.at_us {
                firmware.tick(SinkTime::from_micros(next_tick), in_force);
                firmware.transmit(&mut bytes, usize::MAX);
                next_tick += file.sink.tick_us;
            }
            if let Some(text) = &entry.sample {
                in_force = sample(text);
            }
            if let Some(host) = &entry.host {
                firmware.receive(
                    format!("{host}\n").as_bytes(),
                    SinkTime::from_micros(entry.at_us),
                );
                firmware.transmit(&mut bytes, usize::MAX);
            }
            let text = String::from_utf8(bytes).unwrap();
            let said: Vec<String> = text.lines().map(blank).collect();
            if said != entry.sink {
                failures.push(format!(
                    "{}, at {} us after {:?}:\n  said     {said:?}\n  expected {:?}",
                    dialogue.name, entry.at_us, entry.host, entry.sink
                ));
                break;
            }
        }
    }
    assert!(failures.is_empty(), "{}", failures.join("\n"));
}

#[test]
fn both_sides_agree_on_the_checksum() {
    // CRC-16/IBM-3740, check value of the catalogue of parametrised CRC algorithms.
    assert_eq!(checksum(b"123456789"), 0x29B1);
    let mut bench = Bench::cold();
    let mut bytes = line("123456789 1");
    bytes.truncate(bytes.len() - 1);
    bytes.extend_from_slice(b"\r\n");
    bench.raw(&bytes);
    assert_eq!(bench.heard(), ["no 1 session"]);
}
