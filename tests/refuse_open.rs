//! What is refused about decay, dephasing, mixtures and read-out, and how: the whole message of each mistake.
#![allow(clippy::unwrap_used)] // a test may end at the first surprise

mod rig;

use rig::refusal;

/// A config on whose seventh line the words stand.
fn config(sections: &str) -> String {
    let start = if sections.contains("start:") { "" } else { "start: a\n" };
    format!("format: 1\nnumbers: {{life: 52 us}}\nsystem: {{levels: {{a: 0 GHz, b: 5 GHz, c: 5 GHz}}}}\noperators: {{j: {{rows: [[0, 1, 0], [0, 0, 1], [0, 0, 0]]}}}}\nsequence: [{{wait: life}}]\ndecay: [{{from: b, to: a, lifetime: life}}]\n{sections}\n{start}record: {{populations: all, mean_of: j}}\n")
}

#[track_caller]
fn says(sections: &str, wanted: &str) {
    let text = refusal(&config(sections));
    let text: String =
        text.lines().filter(|line| !line.starts_with("    7 |") && !line.starts_with("      |")).collect::<Vec<_>>().join("\n");
    assert_eq!(text.trim_end(), wanted);
}

/// The same for a decay of its own on the seventh line.
#[track_caller]
fn decay_says(entry: &str, wanted: &str) {
    let text = config(entry).replace("decay: [{from: b, to: a, lifetime: life}]", "decay:");
    let text = refusal(&text);
    let text: String =
        text.lines().filter(|line| !line.starts_with("    7 |") && !line.starts_with("      |")).collect::<Vec<_>>().join("\n");
    assert_eq!(text.trim_end(), wanted);
}

#[test]
fn refuse_coherence_times_that_do_not_say_which() {
    says(
        "dephasing: [{energy_of: {b: 1}, T2: 66 us}]",
        "error: config.yaml, line 7, column 33: \"T2\" is read in three ways.
  Say which decay of the coherence was measured.
  Write: pure_time: 66 us      (lifetimes already taken out)
  Write: total_time: 66 us, of: [a, b]      (measured echo decay; this file's lifetime of 52 us is taken out, leaving 180.632 us pure)
  Write: and put a Ramsey decay (T2-star) under noise: spread: {t2_star: 66 us}",
    );
    says(
        "dephasing: [{energy_of: {b: 1}, total_time: 66 us}]",
        "error: config.yaml, line 7, column 33: dephasing (total_time) needs the key \"of\".
  A total time is that of one pair; with more than two levels it must be named.
  Write: of: [a, b]      (the pair that was measured)",
    );
}

#[test]
fn refuse_coherence_times_that_cannot_be() {
    says(
        "dephasing: [{energy_of: {b: 1}, total_time: 120 us, of: [a, b]}]",
        "error: config.yaml, line 7, column 45: a total coherence time of 120 us is impossible here.
  Level b lives 52 us (line 6), so its coherence with a can last at most 2 x 52 us = 104 us.
  Write: a total_time below 104 us, or a longer lifetime on line 6",
    );
    says(
        "dephasing: [{energy_of: {b: 1}, total_time: 60 us, of: [a, b]}, {energy_of: {b: 2}, pure_time: 80 us}]",
        "error: config.yaml, line 7, column 45: a total coherence time of 60 us is impossible here.
  Lifetimes and the other entries under dephasing alone leave a and b a coherence time of 16.7742 us.
  Write: a total_time below 16.7742 us",
    );
    says(
        "dephasing: [{energy_of: {c: 1}, total_time: 60 us, of: [a, b]}]",
        "error: config.yaml, line 7, column 45: a and b have the same weight, so this dephasing does not act on their coherence.
  The coherence between m and n decays at (w_m - w_n)^2 / pure_time.
  Write: of: [a, b]      (a pair of different weights)",
    );
    says(
        "dephasing: [{energy_of: {b: 1}, total_time: 60 us, of: [a, b]}, {energy_of: {b: 2}, total_time: 60 us, of: [b, c]}]",
        "error: config.yaml, line 7, column 45: two total times speak of one pair: this one and line 7 both dephase a and b.
  A total time holds all that ends a coherence, so their shares cannot be told apart.
  Write: pure_time in one of them",
    );
    says(
        "dephasing: [{energy_of: j, pure_time: 60 us}]",
        "error: config.yaml, line 7, column 13: the operator \"j\" is not diagonal and real, so it is no turn about z.
  Write: an operator with real entries on its diagonal alone",
    );
}

#[test]
fn refuse_shares_that_do_not_add_up() {
    decay_says(
        "  - {from: b, lifetime: life, to: {a: 0.4, outside: 0.5}}",
        "error: config.yaml, line 7, column 35: the shares add up to 0.9, not 1.
  Population that leaves \"b\" must go somewhere; 0.1 is missing.
  Write: to: {a: 0.4, outside: 0.6}
  Write: to: {a: 0.4, outside: rest}",
    );
    decay_says(
        "  - {from: b, lifetime: life, to: {a: 0.9, c: 0.3}}",
        "error: config.yaml, line 7, column 35: the shares add up to 1.2, not 1.
  No more can leave \"b\" than there is; 0.2 is too much.
  Write: to: {a: 0.9, c: 0.1}
  Write: to: {a: 0.9, c: rest}",
    );
    decay_says(
        "  - {from: b, lifetime: life, to: {a: 1.5, c: 1}}",
        "error: config.yaml, line 7, column 35: the share of a is 1.5; a share lies between 0 and 1.
  Write: a share from 0 to 1, or rest",
    );
    decay_says(
        "  - {from: b, lifetime: life, to: {a: rest, c: rest}}",
        "error: config.yaml, line 7, column 48: \"rest\" stands twice under to.
  What is left over can go to one place only.\n  Write: a number in place of one of them",
    );
    says(
        "start: {mix: {a: 0.6, b: 0.1}}",
        "error: config.yaml, line 7, column 14: the shares add up to 0.7, not 1.
  The system must be somewhere; 0.3 is missing.
  Write: mix: {a: 0.6, b: 0.4}
  Write: mix: {a: 0.6, b: rest}",
    );
    says(
        "start: {mix: {a: 0.9, b: 0.8, c: 0.1}}",
        "error: config.yaml, line 7, column 14: the shares add up to 1.8, not 1.
  The system cannot be in more than one place; 0.8 is too much.
  Write: mix: {a: 0.5, b: 0.444444, c: 0.0555556}      (the same proportions)",
    );
}

#[test]
fn refuse_decays_that_have_no_meaning() {
    decay_says(
        "  - {from: b, to: b, lifetime: life}",
        "error: config.yaml, line 7, column 19: \"b\" would decay into itself.
  A jump that leaves the level unchanged is dephasing.
  Write: dephasing: [{energy_of: {b: 1}, pure_time: value}]",
    );
    decay_says(
        "  - {from: b, to: a, rate: 6 MHz * life / life}",
        "error: config.yaml, line 7, column 28: decay / rate must be a rate, but this is a frequency.
  A rate has no angle in it; a linewidth in Hz is one over 2 pi of it.
  Write: value / 1 rad      (2 pi times a linewidth, as a rate)
  Write: linewidth: value      (the full width of the line, in Hz)",
    );
    decay_says(
        "  - {from: b, to: a, lifetime: life, linewidth: 3 kHz}",
        "error: config.yaml, line 7, column 38: decay takes only one of lifetime and linewidth.
  Here stand lifetime (line 7) and linewidth (line 7).
  Write: one of them alone",
    );
    decay_says(
        "  - {from: b, to: a, lifetime: -1 * life}",
        "error: config.yaml, line 7, column 32: decay / lifetime must be larger than 0, but is -52 us.
  Write: a value above 0",
    );
}

#[test]
fn refuse_baths_without_an_answer() {
    decay_says(
        "  - {from: c, to: b, lifetime: life, temperature: 20 mK}",
        "error: config.yaml, line 7, column 51: c and b have the same energy, so no bath temperature says how they exchange.
  The number of thermal quanta of a gap of zero is infinite.
  Write: two entries, one each way, with their rates and no temperature",
    );
    decay_says(
        "  - {from: a, to: b, lifetime: life, temperature: 20 mK}",
        "error: config.yaml, line 7, column 51: b lies above a: a bath at zero temperature never lifts it there.
  The stated rate is the one at zero temperature; what the bath excites follows from it by detailed balance.
  Write: {from: b, to: a, ..}",
    );
    decay_says(
        "  - {from: b, to: outside, lifetime: life, temperature: 20 mK}",
        "error: config.yaml, line 7, column 57: what leaves \"b\" to the outside has no gap, so no bath temperature applies to it.
  Write: an entry of its own for the share that goes outside, without temperature",
    );
    decay_says(
        "  - {operator: j, lifetime: life, temperature: 20 mK}",
        "error: config.yaml, line 7, column 48: c and b have the same energy, so no bath temperature says how they exchange.
  The number of thermal quanta of a gap of zero is infinite.
  Write: two entries, one each way, with their rates and no temperature",
    );
    decay_says(
        "  - {from: b, to: a, lifetime: life, temperature: -20 mK}",
        "error: config.yaml, line 7, column 51: a temperature of -20 mK is below absolute zero.
  Write: a temperature of 0 K or more",
    );
}

#[test]
fn refuse_steady_states_that_are_none() {
    decay_says(
        "  - {from: b, to: a, lifetime: life}\nstart: steady",
        "error: config.yaml, line 8, column 8: there is no steady state to give: several states stay as they are (2 free numbers), and nothing says which one is meant.
    8 | start: steady
  Write: start: {mix: {..}}, or a decay that joins the levels",
    );
    let lossy =
        config("start: steady").replace("levels: {a: 0 GHz, b: 5 GHz, c: 5 GHz}", "levels: {a: 0 GHz, b: 5 GHz, c: 7 GHz}").replace(
            "{from: b, to: a, lifetime: life}",
            "{from: a, to: outside, lifetime: life}, {from: b, to: outside, lifetime: life}, {from: c, to: a, lifetime: life}",
        );
    assert!(refusal(&lossy).contains("there is no steady state to give: everything leaves the system in the end."), "{}", refusal(&lossy));
}

#[test]
fn refuse_reads_that_are_no_probabilities() {
    let shots = |reads: &str| config("start: a").replace("mean_of: j", &format!("mean_of: j, shots: {{number: 500, reads: {reads}}}"));
    let text = refusal(&shots("{dark: [0.9, 0.1, 0], bright: [0.1, 0.8, 1]}"));
    assert!(text.contains("the reads of \"b\" add up to 0.9, not 1.") && text.contains("Write: 0.9 for b in the row bright"), "{text}");
    let text = refusal(&shots("[[0.9, 0.1, 0], [0.1, 0.9, 1]]"));
    assert!(text.contains("2 reads are listed for 3 levels."), "{text}");
    let text = refusal(&shots("{dark: [0.9, 0.1], bright: [0.1, 0.9, 1]}"));
    assert!(text.contains("the row of the read \"dark\" has 2 entries; 3 are expected."), "{text}");
    let text = refusal(&shots("{dark: [1.2, 0.1, 0], bright: [-0.2, 0.9, 1]}"));
    assert!(text.contains("a probability among the reads of a is 1.2; it must be from 0 to 1."), "{text}");
}

#[test]
fn refuse_records_of_closed_systems() {
    let with = |record: &str| config("start: a").replace("mean_of: j", &format!("mean_of: j, {record}"));
    let text = refusal(&with("propagator: true"));
    assert!(text.contains("\"propagator\" has no meaning once the system decays or dephases (line 6)."), "{text}");
    let text = refusal(&with("quasi_energies: {period: 1 us}"));
    assert!(text.contains("\"quasi_energies\" has no meaning once the system decays or dephases (line 6)."), "{text}");
    let text = refusal(&with("error_budget: [decay]"));
    assert!(text.contains("error_budget splits the gate error, and no gate is recorded."), "{text}");
}
