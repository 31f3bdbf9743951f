//! The fingerprint of a config: SHA-256 (FIPS 180-4, 2015) over every file it is made of and every number put in place of a
//! written one.

use sha2::{Digest, Sha256};

use crate::config::document::Document;

/// The first twelve hexadecimal digits.
pub fn fingerprint(document: &Document) -> String {
    let mut hash = Sha256::new();
    for (k, file) in document.sources.files().iter().enumerate().filter(|(_, file)| !file.bytes.is_empty()) {
        // the name of the config itself does not count, those of its inputs do
        if k > 0 {
            hash.update(file.path.file_name().unwrap_or_default().as_encoded_bytes());
        }
        hash.update((file.bytes.len() as u64).to_le_bytes());
        hash.update(&file.bytes);
    }
    for (name, value) in &document.set {
        hash.update(name.as_bytes());
        hash.update(b"=");
        hash.update(value.as_bytes());
        hash.update(b"\n");
    }
    hash.finalize().iter().take(6).map(|byte| format!("{byte:02x}")).collect()
}

/// SHA-256 of all that a reader gives, in hexadecimal digits.
pub fn sum_of(mut from: impl std::io::Read) -> std::io::Result<String> {
    let mut hash = Sha256::new();
    let mut buffer = vec![0; 1 << 16];
    loop {
        match from.read(&mut buffer)? {
            0 => return Ok(hash.finalize().iter().map(|byte| format!("{byte:02x}")).collect()),
            count => hash.update(&buffer[..count]),
        }
    }
}
