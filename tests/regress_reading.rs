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

/// Found by mutation: for each value of a line the line was walked from its start, and a list of thirty thousand took 15 s.
#[test]
fn regress_a_long_line_took_the_square_of_its_length() {
    let samples = vec!["0.5"; 100_000].join(", ");
    let pulse = format!("{{shape: samples, between: hold, length: 2 us, peak: 0.7 MHz, samples: [{samples}]}}");
    let text = rig::ONE_PULSE.replace("{shape: square, length: 2 us, peak: 0.7 MHz}", &pulse);
    let clock = std::time::Instant::now();
    rig::document(&text, &[]);
    // 0.2 s; it was three minutes
    assert!(clock.elapsed().as_secs_f64() < 5.0, "{:?}", clock.elapsed());
}

/// Found by mutation: each of many mistakes kept the list of all names and was compared with all others.
#[test]
fn regress_a_hundred_thousand_mistakes_took_a_minute() {
    let names: Vec<String> = (0..100_000).map(|k| format!("x{k}")).collect();
    let text = rig::ONE_PULSE.replace("populations: all", &format!("populations: [{}]", names.join(", ")));
    let clock = std::time::Instant::now();
    let message = rig::refusal(&text);
    assert!(message.contains("no level is called \"x0\""), "{message}");
    assert!(message.contains("and at least 1980 more mistakes after these 20."), "{message}");
    // 0.1 s; it was 78 s
    assert!(clock.elapsed().as_secs_f64() < 5.0, "{:?}", clock.elapsed());
}

/// Found by mutation: a key with a closing bracket was taken for the tail of a cut value, and nothing was said of it.
#[test]
fn regress_a_key_with_a_bracket_was_refused_without_a_word() {
    let message = rig::refusal(&rig::ONE_PULSE.replace("- pulse:", "- pul)se:"));
    assert!(message.contains("error: config.yaml, line 12, column 5: "), "{message}");
    assert!(message.contains("no key \"pul)se\""), "{message}");
    // and behind a text, which may hold a bracket itself, the tail was lost
    let message = rig::refusal(&format!("{}output: {{folder: runs (1, 2)}}\n", rig::ONE_PULSE));
    assert!(message.contains("\"runs (1\" is cut off"), "{message}");
    // one cut is one mistake
    let message = rig::refusal(&rig::ONE_PULSE.replace("up: 40 MHz", "up: max(40 MHz, 3 MHz)"));
    assert_eq!(message.matches("is cut off").count(), 1, "{message}");
}

/// `final:` named a quantity that no other word recorded, and the file was refused; it switches things on, never off.
#[test]
fn regress_final_records_what_it_names() {
    let text = "format: 1\nsystem: {levels: {down: 0 MHz, up: 20 MHz}}\nsequence: [{wait: 1 us}]\nstart: down\n\
                record: {populations: [down], final: {population: up, adiabatic_population: up, energy: true}}\n";
    let document = nutate::config::document::read_str("final.yaml", text, std::path::Path::new(""), &[]).unwrap();
    let names: Vec<&str> = document.record.finals.iter().map(|(name, _)| name.as_str()).collect();
    assert_eq!(names, ["population_up", "adiabatic_population_up", "energy_Hz"]);
    let plan = nutate::plan::Plan::new(document);
    let outcome = nutate::outcome::compute(plan.document(), &plan.point().unwrap());
    let recorded: Vec<&str> = outcome.columns.iter().map(|column| column.name.as_str()).collect();
    assert_eq!(recorded, ["population_down", "population_up", "adiabatic_population_down", "adiabatic_population_up", "energy_Hz"]);
}
