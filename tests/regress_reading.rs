//! Mistakes of the reader that were found and corrected, each a sentence.

mod rig;

/// Found by mutation: thirty thousand ones in one value ended the program.
#[test]
fn regress_a_long_sum_overflowed_the_stack() {
    let text = rig::ONE_PULSE.replace("2 us", &format!("1 us{}", " + 1 us".repeat(30_000)));
    let message = rig::refusal(&text);
    assert!(message.contains("more than 1000 operations stand in this one value"), "{message}");
    assert!(message.contains("line 10, column "), "{message}");
    let text = rig::ONE_PULSE.replace("2 us", &format!("1 us{}", " + 1 us".repeat(1000)));
    rig::close(*rig::run(&text).times_s.last().unwrap(), 1001e-6, 1e-15);
}

/// Found by mutation: a name of thirty thousand letters was quoted whole.
#[test]
fn regress_a_long_name_was_quoted_whole() {
    let text = rig::ONE_PULSE.replace("envelope: flat", &format!("envelope: {}", "flat".repeat(10_000)));
    let message = rig::refusal(&text);
    assert!(message.contains("no envelope is called \"flatflat"), "{message}");
    assert!(message.lines().all(|line| line.chars().count() <= 500), "{message}");
}
