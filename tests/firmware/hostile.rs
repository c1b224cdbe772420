//! The firmware's core under damaged and hostile lines, watched by the address and
//! undefined-behaviour sanitisers.
//!
//! `SINKWARDEN_FUZZ_SECONDS` makes it last longer, `SINKWARDEN_FUZZ_SEED` begins at another
//! seed. A failure names its seed.

use std::io::Write;
use std::path::PathBuf;
use std::process::{Command, Stdio};
use std::time::Instant;

use wire::{Line as _, SinkLine, checksum};

use crate::process::reference;

/// How long the test command fuzzes.
const SECONDS: u64 = 10;
/// Records in one process.
const RECORDS: usize = 20_000;

fn number_from(variable: &str) -> Option<u64> {
    std::env::var(variable).ok()?.parse().ok()
}

fn build() -> PathBuf {
    let program = PathBuf::from(env!("CARGO_TARGET_TMPDIR")).join("hostile");
    let core = reference().join("core");
    let sources = std::fs::read_dir(&core).unwrap().filter_map(|entry| {
        let path = entry.unwrap().path();
        path.extension()
            .is_some_and(|extension| extension == "c")
            .then_some(path)
    });
    let output = Command::new("cc")
        .args(["-std=c99", "-O1", "-g", "-fsanitize=address,undefined"])
        .args(["-fno-sanitize-recover=all", "-I"])
        .arg(&core)
        .args(sources)
        .arg(PathBuf::from(env!("CARGO_MANIFEST_DIR")).join("firmware/hostile.c"))
        .arg("-o")
        .arg(&program)
        .output()
        .unwrap();
    assert!(
        output.status.success(),
        "{}",
        String::from_utf8_lossy(&output.stderr)
    );
    program
}

/// xorshift64 (Marsaglia, Journal of Statistical Software 8(14), 2003).
struct Chance(u64);

impl Chance {
    fn next(&mut self) -> u64 {
        self.0 ^= self.0 << 13;
        self.0 ^= self.0 >> 7;
        self.0 ^= self.0 << 17;
        self.0
    }

    fn below(&mut self, most: u64) -> u64 {
        (self.next() >> 11) % most
    }

    fn byte(&mut self) -> u8 {
        (self.next() >> 24).to_le_bytes()[0]
    }

    fn one_of<'a>(&mut self, of: &[&'a str]) -> &'a str {
        of[usize::try_from(self.below(of.len() as u64)).unwrap()]
    }
}

/// What a hostile host says next: it keeps count of the orders, so that most are executed.
struct Hostile {
    chance: Chance,
    number: u64,
    ticks: u64,
}

impl Hostile {
    fn value(&mut self) -> String {
        match self.chance.below(8) {
            0 => "0".to_owned(),
            1 => self
                .chance
                .one_of(&[
                    "-1",
                    "9223372036854775807",
                    "9223372036854775808",
                    "-9223372036854775808",
                    "18446744073709551616",
                    "4294967296",
                    "65536",
                    "00",
                    "-0",
                    "+1",
                    "",
                    "x",
                    "2678400000000",
                    "999999999",
                ])
                .to_owned(),
            2 => self.chance.next().to_string(),
            3 => (self.ticks * 1_000 + self.chance.below(100_000)).to_string(),
            _ => self.chance.below(2_000_000).to_string(),
        }
    }

    fn text(&mut self) -> String {
        let kind = self.chance.one_of(&[
            "hello",
            "clock",
            "off",
            "limit",
            "deadman",
            "readback",
            "step",
            "step",
            "step",
            "clear",
            "reset",
            "isolator",
            "burst",
            "frobnicate",
        ]);
        let number = match self.chance.below(10) {
            0 => self.chance.below(70_000),
            _ => self.number,
        };
        self.number = if kind == "hello" { 1 } else { number + 1 };
        let word = match kind {
            "step" => Some(self.chance.one_of(&["current", "power", "resistance", "x"])),
            "limit" => Some(self.chance.one_of(&[
                "current",
                "power",
                "voltage-high",
                "voltage-low",
                "temperature",
                "excess",
            ])),
            _ => None,
        };
        let fields = match kind {
            "clock" | "off" | "reset" => 0,
            "hello" | "deadman" | "readback" | "clear" | "isolator" => 1,
            "limit" => 2,
            "burst" => 3,
            _ => 4,
        } + u64::from(self.chance.below(20) == 0);
        let mut text = format!("{kind} {number}");
        if let Some(word) = word {
            text = format!("{text} {word}");
        }
        for _ in 0..fields {
            let value = self.value();
            text = format!("{text} {value}");
        }
        text
    }

    /// A session that may draw: what most lines need to get anywhere.
    fn ready(&mut self) -> Vec<u8> {
        let session = self.chance.below(1_000) + 1;
        let mut text = vec![format!("hello 1 {session}")];
        for (index, limit) in [
            "current 3000000",
            "power 99000000",
            "voltage-high 90000000",
            "voltage-low 0",
            "temperature 200000",
            "excess 900000000",
        ]
        .iter()
        .enumerate()
        {
            text.push(format!("limit {} {limit} 0", index + 1));
        }
        text.push("reset 7".to_owned());
        text.push("readback 8 20000".to_owned());
        self.number = 9;
        text.iter().flat_map(|line| sound(line)).collect()
    }

    fn bytes(&mut self) -> Vec<u8> {
        if self.chance.below(40) == 0 {
            return self.ready();
        }
        let mut bytes = sound(&self.text());
        match self.chance.below(12) {
            0 => {
                let at = usize::try_from(self.chance.below(bytes.len() as u64)).unwrap();
                bytes[at] = self.chance.byte();
            }
            1 => bytes.truncate(usize::try_from(self.chance.below(bytes.len() as u64)).unwrap()),
            2 => {
                bytes = (0..self.chance.below(300))
                    .map(|_| self.chance.byte())
                    .collect();
            }
            3 => bytes = bytes.repeat(3),
            _ => {}
        }
        bytes
    }

    fn record(&mut self) -> Vec<u8> {
        let bytes = self.bytes();
        let mut record = u16::try_from(bytes.len()).unwrap().to_le_bytes().to_vec();
        record.extend(bytes);
        let ticks = self.chance.byte() >> self.chance.below(8);
        self.ticks += u64::from(ticks);
        record.push(ticks);
        record.extend((0..4).map(|_| self.chance.byte()));
        record
    }
}

fn sound(text: &str) -> Vec<u8> {
    format!("{text} {:04X}\n", checksum(text.as_bytes())).into_bytes()
}

/// One process from power-up on; returns how many lines it sent.
fn run(program: &PathBuf, seed: u64) -> usize {
    let mut hostile = Hostile {
        chance: Chance(seed.wrapping_mul(0x9E37_79B9_7F4A_7C15) | 1),
        number: 1,
        ticks: 0,
    };
    let mut input = hostile.ready();
    let head = u16::try_from(input.len()).unwrap().to_le_bytes();
    input.splice(0..0, head);
    input.extend([1, 0, 0, 0, 0]);
    for _ in 0..RECORDS {
        input.extend(hostile.record());
    }
    let mut child = Command::new(program)
        .stdin(Stdio::piped())
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .unwrap();
    let mut stdin = child.stdin.take().unwrap();
    let writer = std::thread::spawn(move || {
        // A core that was caught no longer reads.
        let _ = stdin.write_all(&input);
    });
    let output = child.wait_with_output().unwrap();
    writer.join().unwrap();
    assert!(
        output.status.success(),
        "seed {seed}: {}",
        String::from_utf8_lossy(&output.stderr)
    );
    let lines = output.stdout.split(|byte| *byte == b'\n');
    let mut count = 0;
    for line in lines.filter(|line| !line.is_empty()) {
        let decoded = SinkLine::decode(line);
        assert!(
            decoded.is_ok(),
            "seed {seed}: the core sent `{}`: {decoded:?}",
            line.escape_ascii()
        );
        count += 1;
    }
    count
}

#[expect(
    clippy::disallowed_methods,
    reason = "how long to fuzz is the only use of this clock"
)]
#[test]
fn hostile_lines_neither_break_the_core_nor_make_it_send_a_wrong_one() {
    let program = build();
    let seconds = number_from("SINKWARDEN_FUZZ_SECONDS").unwrap_or(SECONDS);
    let first = number_from("SINKWARDEN_FUZZ_SEED").unwrap_or(1);
    let began = Instant::now();
    let mut seed = first;
    let mut lines = 0;
    while seed == first || began.elapsed().as_secs() < seconds {
        lines += run(&program, seed);
        seed += 1;
    }
    let hostile = (seed - first) * RECORDS as u64;
    eprintln!(
        "seeds {first} to {}: {hostile} hostile lines, {lines} lines back",
        seed - 1
    );
    assert!(
        lines > RECORDS / 2,
        "the core hardly answered: {lines} lines"
    );
}
