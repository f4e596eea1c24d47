//! What do two threads gain over one, and are their answers right?
//!
//!     cargo bench --bench batch -- [PAIRS]
//!
//! Fits PAIRS (10,000) simulated pairs of 200 channels a line in blocks, each block with one thread and
//! with two, one after the other, so that a machine whose speed drifts treats both alike. Reading is
//! left out; preparing, measuring, fitting and the row of results are not. Processor time (as Linux
//! counts it) tells what sharing out costs where other programs take the cores.
#![allow(
    clippy::print_stdout,
    clippy::unwrap_used,
    reason = "a bench prints, and stops where it cannot go on"
)]

#[path = "../examples/stream/survey.rs"]
mod survey;

use inrush::report::Row;
use inrush::run::{BatchSettings, PairJob, PairSettings, fit_pairs, pair_row};
use std::ops::{ControlFlow, Range};
use std::sync::Arc;
use std::time::Instant;
use survey::Survey;

const BLOCKS: u64 = 10;

/// Share of the speeds that lie within three of their errors of the truth, at least. Normal errors
/// would give 0.997; formal ones are too small where the profile hardly shows the speed.
const LEAST_WITHIN_THREE: f64 = 0.9;

fn main() {
    let pairs: u64 = std::env::args()
        .find_map(|argument| argument.parse().ok())
        .unwrap_or(10_000);
    let survey = Survey::draw().unwrap();
    let block = pairs.div_ceil(BLOCKS);
    let mut answers = Answers::default();
    let (mut seconds, mut processor) = ([0.0; 2], [0.0; 2]);
    let mut ratios = Vec::new();
    for first in (0..pairs).step_by(usize::try_from(block).unwrap()) {
        let numbers = first..pairs.min(first + block);
        let ([one, one_processor], rows) = timed(&survey, numbers.clone(), 1);
        let ([two, two_processor], same) = timed(&survey, numbers.clone(), 2);
        for (row, same) in rows.iter().zip(&same) {
            assert_eq!(row.values(), same.values(), "threads change a result");
        }
        answers.check(&survey, numbers, &rows);
        seconds = [seconds[0] + one, seconds[1] + two];
        processor = [processor[0] + one_processor, processor[1] + two_processor];
        ratios.push(one / two);
    }
    ratios.sort_by(f64::total_cmp);
    for (name, seconds, processor) in [
        ("one thread ", seconds[0], processor[0]),
        ("two threads", seconds[1], processor[1]),
    ] {
        let [wall_ms, processor_ms] = [seconds, processor].map(|time| 1e3 * time / pairs as f64);
        println!("{name}  {wall_ms:8.3} ms a pair, {processor_ms:.3} ms of a processor");
    }
    println!(
        "one over two {:8.3} for {pairs} pairs, in blocks {:.3} to {:.3}, median {:.3}",
        seconds[0] / seconds[1],
        ratios[0],
        ratios[ratios.len() - 1],
        ratios[ratios.len() / 2]
    );
    answers.conclude(pairs);
}

/// Seconds for a block by the clock and of processors, and its rows in order.
fn timed(survey: &Survey, numbers: Range<u64>, threads: usize) -> ([f64; 2], Vec<Row>) {
    let settings = Arc::new(PairSettings::formal());
    let jobs: Vec<PairJob> = numbers
        .map(|number| PairJob::Spectra {
            pair: Box::new(survey.pair(number).unwrap()),
            settings: Arc::clone(&settings),
        })
        .collect();
    let mut rows = Vec::with_capacity(jobs.len());
    let (begun, processor) = (Instant::now(), processor_seconds());
    let ended = fit_pairs(
        &BatchSettings::with_threads(threads),
        jobs,
        |outcome| pair_row(&outcome),
        |_, row| {
            rows.push(row.unwrap());
            ControlFlow::<()>::Continue(())
        },
    )
    .unwrap();
    let seconds = begun.elapsed().as_secs_f64();
    let processor = processor_seconds() - processor;
    assert_eq!(ended, ControlFlow::Continue(rows.len() as u64));
    ([seconds, processor], rows)
}

/// Processor time of this process so far, s, user and system; `NaN` where the system is not Linux.
fn processor_seconds() -> f64 {
    const TICKS_PER_S: f64 = 100.0;
    let text = std::fs::read_to_string("/proc/self/stat").unwrap_or_default();
    // fields 14 and 15 of proc(5), of which the first two end with the name's bracket
    let after = text.rsplit_once(") ").map_or("", |(_, after)| after);
    let fields = after.split(' ').skip(11).take(2);
    let ticks = fields.map(|field| field.parse().unwrap_or(f64::NAN));
    ticks
        .reduce(|user, system| user + system)
        .unwrap_or(f64::NAN)
        / TICKS_PER_S
}

/// How many speeds have an error, and how many of those are within 1, 2 and 3 of it.
#[derive(Default)]
struct Answers {
    with_error: u32,
    within: [u32; 3],
}

impl Answers {
    fn check(&mut self, survey: &Survey, numbers: Range<u64>, rows: &[Row]) {
        for (number, row) in numbers.zip(rows) {
            let id = row.get("id").unwrap().text().unwrap();
            assert_eq!(id, survey::name(number), "out of order");
            let value = |name| row.get(name).unwrap().number();
            let (Some(speed), Some(error)) = (value("v_in_km_s"), value("v_in_km_s_err")) else {
                continue;
            };
            self.with_error += 1;
            let off = (speed - survey.v_in_km_s(number)).abs() / error;
            for (count, errors) in self.within.iter_mut().zip([1.0, 2.0, 3.0]) {
                *count += u32::from(off < errors);
            }
        }
    }

    fn conclude(&self, pairs: u64) {
        let shares = self
            .within
            .map(|count| f64::from(count) / f64::from(self.with_error));
        println!(
            "speeds       {} of {pairs} with an error; within 1, 2, 3 of it: {:.3} {:.3} {:.3}",
            self.with_error, shares[0], shares[1], shares[2]
        );
        assert!(shares[2] > LEAST_WITHIN_THREE, "speeds are wrong");
    }
}
