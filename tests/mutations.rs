//! Readers of formulas, units, sheets, data files and records, fed with what nobody meant to write: corpora in
//! `tests/corpus` and the examples, changed at random from a fixed seed. No panic, no hang.
//!
//! A short run by itself; `FUZZ_SECONDS=3600 cargo test --test mutations` goes on for that long with each reader.

use spanwise::formula::syntax;
use spanwise::record::compare;
use spanwise::record::digests::Digests;
use spanwise::sheet::{self, DataFile, Reading};
use spanwise::unit::Unit;
use std::fs;
use std::path::Path;
use std::time::{Duration, Instant};

/// Random numbers: xorshift64* (Vigna, ACM Trans. Math. Softw. 42, 2016).
struct Random(u64);

impl Random {
    fn next(&mut self) -> u64 {
        self.0 ^= self.0 >> 12;
        self.0 ^= self.0 << 25;
        self.0 ^= self.0 >> 27;
        self.0.wrapping_mul(0x2545_F491_4F6C_DD1D)
    }

    fn below(&mut self, n: usize) -> usize {
        (self.next() >> 33) as usize % n.max(1)
    }
}

const SCRAPS: [&str; 40] = [
    "(",
    ")",
    "[",
    "]",
    "{",
    "}",
    "\"",
    "'",
    "''''",
    "=",
    "..",
    ",",
    ";",
    "^",
    "/",
    "*",
    "-",
    "+",
    "<",
    " in ",
    " and ",
    "if(",
    "max(",
    "jump(",
    "0",
    "1e308",
    "-1e-308",
    "99999999999999999999",
    "nan",
    "inf",
    "x",
    "T",
    "degC",
    "kN/m",
    "\u{3b1}",
    "\u{2212}",
    "\u{0}",
    "\n",
    "\\",
    "null",
];

fn cut(text: &str, mut at: usize) -> usize {
    at = at.min(text.len());
    while !text.is_char_boundary(at) {
        at -= 1;
    }
    at
}

/// One to eight changes: scraps put in, parts taken out, doubled or put in from another text.
fn mutated(random: &mut Random, corpus: &[String]) -> String {
    let mut text = corpus[random.below(corpus.len())].clone();
    for _ in 0..=random.below(8) {
        let at = random.below(text.len() + 1);
        let (at, end) = (cut(&text, at), cut(&text, at + random.below(20)));
        let end = end.max(at);
        match random.below(5) {
            0 => text.insert_str(at, SCRAPS[random.below(SCRAPS.len())]),
            1 => text.replace_range(at..end, ""),
            2 => text.replace_range(at..end, SCRAPS[random.below(SCRAPS.len())]),
            3 => {
                let part = text[at..end].repeat(1 + random.below(40));
                text.insert_str(at, &part);
            }
            _ => {
                let other = &corpus[random.below(corpus.len())];
                let from = cut(other, random.below(other.len() + 1));
                let to = cut(other, from + random.below(60)).max(from);
                text.insert_str(at, &other[from..to]);
            }
        }
        if text.len() > 200_000 {
            break;
        }
    }
    text
}

fn lines(file: &str) -> Vec<String> {
    fs::read_to_string(Path::new("tests/corpus").join(file)).expect("a corpus").lines().map(str::to_owned).collect()
}

fn files(folder: &str) -> Vec<String> {
    let mut paths: Vec<_> = fs::read_dir(folder).expect("a corpus").map(|e| e.expect("an entry").path()).collect();
    paths.sort();
    paths.retain(|p| p.is_file());
    paths.iter().map(|p| String::from_utf8_lossy(&fs::read(p).expect("readable")).into_owned()).collect()
}

/// Feeds a reader with the corpus and with `rounds` changes of it, or for the time asked for.
fn feed(corpus: &[String], rounds: usize, mut read: impl FnMut(&str)) {
    assert!(!corpus.is_empty());
    let mut slowest = (Duration::ZERO, String::new());
    let mut timed = |text: &str| {
        let start = Instant::now();
        read(text);
        if start.elapsed() > slowest.0 {
            slowest = (start.elapsed(), text.to_owned());
        }
    };
    corpus.iter().for_each(|text| timed(text));
    let seconds = std::env::var("FUZZ_SECONDS").ok().and_then(|s| s.parse::<u64>().ok());
    let (start, mut random) = (Instant::now(), Random(0x2385_2385 + seconds.unwrap_or(0)));
    let mut round = 0;
    while seconds.map_or(round < rounds, |s| start.elapsed() < Duration::from_secs(s)) {
        timed(&mutated(&mut random, corpus));
        round += 1;
    }
    assert!(slowest.0 < Duration::from_secs(20), "{:?} for {}", slowest.0, slowest.1);
}

#[test]
fn formulas() {
    feed(&lines("formulas.txt"), 4000, |text| {
        if let Ok(tree) = syntax::parse(text) {
            // What is printed reads back.
            assert!(syntax::parse(&tree.to_string()).is_ok(), "{text}: {tree}");
        }
        let _ = syntax::parse_equation(text);
        let _ = syntax::parse_report(text);
        let _ = syntax::name(text);
    });
}

#[test]
fn units() {
    feed(&lines("units.txt"), 4000, |text| {
        for star in [false, true] {
            if let Ok(unit) = Unit::parse(text, star) {
                assert!(unit.factor.is_finite() && unit.factor > 0.0, "{text}");
                let again = Unit::parse(&unit.text, true).expect("what is printed reads back");
                assert_eq!((again.factor, again.dimension), (unit.factor, unit.dimension), "{text}");
            }
        }
        let _ = spanwise::unit::suggest(text);
    });
}

#[test]
fn sheets() {
    let mut corpus = files("examples/sheets");
    corpus.extend(files("src/cli/starts"));
    feed(&corpus, 150, |text| {
        let data: Vec<DataFile> = sheet::files(text)
            .into_iter()
            .map(|name| DataFile { name, content: Ok("T [degC],k [W/(m K)]\n0,1\n100,2\n".into()) })
            .collect();
        if let Err(faults) = sheet::read_with(text, &Reading { files: &data, ..Reading::default() }) {
            assert!(!faults.is_empty());
            for fault in faults {
                assert!(text.get(fault.span.clone()).is_some(), "{fault:?} of {text}");
            }
        }
    });
}

#[test]
fn data_files() {
    let text = "[given]\nk = { against = \"T\", file = \"k.csv\" }\n[span]\nx = [\"0 m\", \"1 m\"]\n[unknowns]\nT = \"degC\"\n\
                [equations]\ne = \"(k*T')' = 0\"\n[conditions]\na = \"T(0 m) = 20 degC\"\nb = \"T(1 m) = 30 degC\"\n\
                [report]\nm = \"T(0.5 m)\"\n";
    feed(&files("tests/corpus/data"), 600, |content| {
        let data = [DataFile { name: "k.csv".into(), content: Ok(content.to_owned()) }];
        if let Err(faults) = sheet::read_with(text, &Reading { files: &data, ..Reading::default() }) {
            assert!(!faults.is_empty());
        }
    });
}

#[test]
fn records() {
    feed(&files("tests/corpus/records"), 2000, |text| {
        if let Ok(record) = compare::read(text) {
            let list = compare::compare(&record.numbers, &record.numbers);
            assert!(compare::all_agree(&list), "{text}");
            let _ = compare::text(&list, ["a", "b"]);
        }
        let _ = Digests::read(text).map(|d| d.states(|_| None));
    });
}
