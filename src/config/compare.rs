//! `compare:`: variants of the file, each with other numbers or with sections in place of those written.

use super::messages::Fault;
use super::place::Place;
use super::reader::Reader;
use super::tree::{Entry, Kind, Node};

/// How the file as written is called among the variants.
pub const AS_WRITTEN: &str = "as written";

/// Sections that a variant may put in place of the file's.
const REPLACEABLE: [&str; 6] = ["frame", "accuracy", "system", "envelopes", "sequence", "hardware"];

/// A variant.
#[derive(Debug, Clone)]
pub struct Variant {
    /// Its name.
    pub name: String,
    /// Where it stands.
    pub place: Place,
    /// Numbers with other values.
    pub set: Vec<Entry>,
    /// Sections in place of the file's.
    pub sections: Vec<Entry>,
}

/// `compare:`.
#[derive(Debug, Clone)]
pub struct Compare {
    /// Largest difference that is no difference.
    pub tolerance: Option<f64>,
    /// The variant that the others are held against.
    pub against: String,
    /// The variants, in the order written.
    pub variants: Vec<Variant>,
}

/// Reads `compare:`: a list of variants, or a block with tolerance, against and variants.
pub fn read_compare(reader: &mut Reader, node: &Node) -> Option<Compare> {
    let mut compare = Compare { tolerance: None, against: AS_WRITTEN.to_string(), variants: Vec::new() };
    let list = if node.entries().is_some() {
        reader.fields(node, "compare", &["tolerance", "against", "variants"], &[])?;
        if let Some(tolerance) = node.get("tolerance") {
            let value = reader.plain_value(tolerance, "compare / tolerance")?;
            if !(value > 0.0) {
                let found = super::messages::short(value);
                reader.error(
                    tolerance.place,
                    Fault::OutOfRange { what: "the tolerance".to_string(), found, wanted: "larger than 0".to_string() },
                );
                return None;
            }
            compare.tolerance = Some(value);
        }
        reader.need(node, "variants", "compare", "[{name: other, set: {peak: 2 MHz}}]")?
    } else {
        node
    };
    let mut good = true;
    for item in reader.list(list, "compare", "- {name: other, set: {peak: 2 MHz}}")? {
        match read_variant(reader, item) {
            Some(variant) => {
                let taken = variant.name == AS_WRITTEN || compare.variants.iter().any(|other| other.name == variant.name);
                if taken {
                    reader.error(variant.place, Fault::VariantTwice { name: variant.name.clone() });
                    good = false;
                }
                compare.variants.push(variant);
            }
            None => good = false,
        }
    }
    if let Some(against) = node.get("against") {
        let names: Vec<String> =
            std::iter::once(AS_WRITTEN.to_string()).chain(compare.variants.iter().map(|variant| variant.name.clone())).collect();
        let index = reader.name_among(against, "variant", &names)?;
        compare.against = names[index].clone();
    }
    good.then_some(compare)
}

fn read_variant(reader: &mut Reader, node: &Node) -> Option<Variant> {
    let known: Vec<&str> = ["name", "set"].into_iter().chain(REPLACEABLE).collect();
    let entries = reader.fields(node, "a variant of compare", &known, &[("numbers", "Numbers of a variant stand under set.")])?;
    let name = reader
        .need(node, "name", "a variant of compare", "strong drive")
        .and_then(|name| reader.text(name, "name", "name: strong drive"))?
        .to_string();
    let set = match node.get("set") {
        Some(set) => {
            let numbers = reader.number_names();
            let Some(found) = set.entries() else {
                let fault = Fault::Shape {
                    what: "set".to_string(),
                    expected: "a block of numbers".to_string(),
                    example: "set: {peak: 2 MHz}".to_string(),
                };
                reader.error(set.place, fault);
                return None;
            };
            for entry in found.iter().filter(|entry| !numbers.contains(&entry.key)) {
                reader.unknown(entry.place, "number", &entry.key, &numbers);
            }
            found.to_vec()
        }
        None => Vec::new(),
    };
    let sections: Vec<Entry> = entries.iter().filter(|entry| REPLACEABLE.contains(&entry.key.as_str())).cloned().collect();
    if set.is_empty() && sections.is_empty() {
        reader.error(node.place, Fault::VariantChangesNothing { name });
        return None;
    }
    Some(Variant { name, place: node.place, set, sections })
}

/// The tree of a file with a variant's sections in place of its own.
pub fn apply(root: &Node, variant: &Variant) -> Node {
    let mut entries: Vec<Entry> = root.entries().unwrap_or_default().iter().filter(|entry| entry.key != "compare").cloned().collect();
    for section in &variant.sections {
        match entries.iter_mut().find(|entry| entry.key == section.key) {
            Some(entry) => *entry = section.clone(),
            None => entries.push(section.clone()),
        }
    }
    Node { place: root.place, kind: Kind::Map(entries) }
}

/// Whether two values read the same, wherever they stand.
pub fn same(a: &Node, b: &Node) -> bool {
    match (&a.kind, &b.kind) {
        (Kind::Scalar { text: a, .. }, Kind::Scalar { text: b, .. }) => a == b,
        (Kind::List(a), Kind::List(b)) => a.len() == b.len() && a.iter().zip(b).all(|(a, b)| same(a, b)),
        (Kind::Map(a), Kind::Map(b)) => {
            a.len() == b.len() && a.iter().all(|x| b.iter().any(|y| x.key == y.key && same(&x.value, &y.value)))
        }
        _ => false,
    }
}
