//! Inputs nobody would write, for every reader: the seeds of the fuzz targets, changed at
//! random but always the same way. The fuzz targets themselves go on for hours
//! (`DEVELOPERS.md`); this is what every run of the tests can afford.

use std::fs;
use std::path::{Path, PathBuf};
use std::time::{Duration, Instant};

#[path = "../../fuzz/readers.rs"]
mod readers;

/// How many changed inputs each reader is given; `HOSTILE_ROUNDS` asks for others.
const ROUNDS: usize = 3000;

/// No input of a few kilobytes takes longer, however slow the machine.
const LONGEST: Duration = Duration::from_secs(20);

fn fuzz_folder() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("fuzz")
}

/// The seeds of a target, in the order of their names.
fn seeds(target: &str) -> Vec<Vec<u8>> {
    let folder = fuzz_folder().join("seeds").join(target);
    let entries = fs::read_dir(&folder).expect("the seeds of a target");
    let mut paths: Vec<PathBuf> = entries.map(|entry| entry.expect("a seed").path()).collect();
    paths.sort();
    assert!(!paths.is_empty());
    paths.iter().map(|path| fs::read(path).expect("a seed")).collect()
}

/// The words of a dictionary: a quoted text a line, `\x1b` for a byte.
fn words(name: &str) -> Vec<Vec<u8>> {
    let path = fuzz_folder().join("words").join(name).with_extension("dict");
    let text = fs::read_to_string(path).expect("a dictionary");
    let lines = text.lines().filter_map(|line| line.strip_prefix('"')?.strip_suffix('"'));
    lines.map(unescaped).collect()
}

fn unescaped(word: &str) -> Vec<u8> {
    let mut bytes = Vec::new();
    let mut rest = word.as_bytes();
    while let [first, after @ ..] = rest {
        rest = after;
        if let (b'\\', [b'x', one, two, after @ ..]) = (first, after) {
            let digits = [*one, *two];
            let digits = std::str::from_utf8(&digits).expect("two digits");
            bytes.push(u8::from_str_radix(digits, 16).expect("a hexadecimal byte"));
            rest = after;
        } else {
            bytes.push(*first);
        }
    }
    bytes
}

/// Marsaglia's xorshift (J. Stat. Softw. 8 (2003) 14).
struct Random(u64);

impl Random {
    fn below(&mut self, bound: usize) -> usize {
        self.0 ^= self.0 << 13;
        self.0 ^= self.0 >> 7;
        self.0 ^= self.0 << 17;
        usize::try_from(self.0 % bound.max(1) as u64).expect("a small number")
    }

    fn one_of<'a>(&mut self, all: &'a [Vec<u8>]) -> &'a [u8] {
        &all[self.below(all.len())]
    }

    /// A range of some bytes, short more often than long.
    fn range(&mut self, length: usize) -> std::ops::Range<usize> {
        let start = self.below(length + 1);
        let longest = 1 << self.below(10);
        start..(start + self.below(longest) + 1).min(length)
    }
}

/// One change of an input.
fn change(bytes: &mut Vec<u8>, random: &mut Random, seeds: &[Vec<u8>], words: &[Vec<u8>]) {
    let at = random.below(bytes.len() + 1);
    match random.below(10) {
        0 if !bytes.is_empty() => {
            let bit = random.below(8 * bytes.len());
            bytes[bit / 8] ^= 1 << (bit % 8);
        }
        1 if at < bytes.len() => bytes[at] = random.below(256) as u8,
        2 => drop(bytes.drain(random.range(bytes.len()))),
        3 => {
            let copied = bytes[random.range(bytes.len())].to_vec();
            bytes.splice(at..at, copied);
        }
        4 => bytes.truncate(at),
        5 => {
            let other = random.one_of(seeds);
            let piece = other[random.range(other.len())].to_vec();
            bytes.splice(at..at, piece);
        }
        6 => {
            // Many times over: nesting, long names, long numbers.
            let word = random.one_of(words);
            let times = 1 << random.below(9);
            bytes.splice(at..at, word.repeat(times));
        }
        7 => {
            // A number by another.
            let is_digit = |byte: &u8| byte.is_ascii_digit();
            if let Some(start) = bytes[at..].iter().position(is_digit).map(|step| at + step) {
                let length = bytes[start..].iter().take_while(|byte| is_digit(byte)).count();
                let word = random.one_of(words).to_vec();
                bytes.splice(start..start + length, word);
            }
        }
        _ => {
            let word = random.one_of(words).to_vec();
            let length = if random.below(2) == 0 { 0 } else { random.below(40) };
            bytes.splice(at..(at + length).min(bytes.len()), word);
        }
    }
}

fn put_through(target: &str, dictionary: &str, reader: fn(&[u8])) {
    let (seeds, words) = (seeds(target), words(dictionary));
    assert!(words.len() > 20);
    let rounds = std::env::var("HOSTILE_ROUNDS").ok().and_then(|text| text.parse().ok());
    let mut random = Random(0x9E37_79B9_7F4A_7C15);
    for seed in &seeds {
        reader(seed);
    }
    for round in 0..rounds.unwrap_or(ROUNDS) {
        let mut bytes = random.one_of(&seeds).to_vec();
        for _ in 0..=random.below(6) {
            change(&mut bytes, &mut random, &seeds, &words);
        }
        let begun = Instant::now();
        let read = std::panic::catch_unwind(|| reader(&bytes));
        if read.is_err() || begun.elapsed() > LONGEST {
            let shown = String::from_utf8_lossy(&bytes).escape_debug().to_string();
            panic!("{target}, round {round}, {:?}: {shown}", begun.elapsed());
        }
    }
}

#[test]
fn layouts_are_read_or_refused() {
    put_through("layout", "layout", readers::layout);
}

#[test]
fn surveys_are_read_or_refused() {
    put_through("survey", "table", readers::survey);
}

#[test]
fn histories_are_read_or_refused() {
    put_through("history", "table", readers::history);
}

#[test]
fn recordings_are_read_or_refused() {
    put_through("recording", "recording", readers::recording);
}
