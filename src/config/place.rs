//! Where in which file something stands.

use std::path::{Path, PathBuf};

/// A stretch of one line of one source file; lines and columns count from 1, columns and lengths in characters.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Default)]
pub struct Place {
    /// Which of [`Sources`].
    pub file: u16,
    /// Line, from 1; 0 where the file as a whole is meant.
    pub line: u32,
    /// Column, from 1.
    pub column: u32,
    /// Characters marked.
    pub length: u32,
}

impl Place {
    /// The file as a whole.
    pub fn whole_file(file: u16) -> Place {
        Place { file, ..Place::default() }
    }

    /// The part of this place that starts `offset` characters in and is `length` long.
    pub fn part(self, offset: usize, length: usize) -> Place {
        Place { column: self.column + offset as u32, length: length.max(1) as u32, ..self }
    }
}

/// A file that was read, kept for messages and for the archive of a result.
#[derive(Debug, Clone)]
pub struct SourceFile {
    /// As the user named it (a file named in a config: beside that config).
    pub path: PathBuf,
    /// The bytes, untouched.
    pub bytes: Vec<u8>,
    /// The text without byte order mark.
    pub text: String,
}

/// Every file that one config is made of, the config itself first.
#[derive(Debug, Clone, Default)]
pub struct Sources(Vec<SourceFile>);

impl Sources {
    /// Adds a file and returns its number.
    pub fn add(&mut self, path: &Path, bytes: Vec<u8>, text: String) -> u16 {
        self.0.push(SourceFile { path: path.to_path_buf(), bytes, text });
        (self.0.len() - 1) as u16
    }

    /// The files, the config first.
    pub fn files(&self) -> &[SourceFile] {
        &self.0
    }

    /// Name of a file as messages show it.
    pub fn name(&self, file: u16) -> String {
        self.0.get(usize::from(file)).map_or_else(String::new, |source| source.path.display().to_string())
    }

    /// One line of a file, without its end.
    pub fn line(&self, file: u16, line: u32) -> Option<&str> {
        let text = &self.0.get(usize::from(file))?.text;
        lines(text).nth((line as usize).checked_sub(1)?)
    }
}

/// Lines of a text, whatever ends them: LF, CR LF or a lone CR.
pub fn lines(text: &str) -> impl Iterator<Item = &str> {
    let mut rest = Some(text);
    std::iter::from_fn(move || {
        let now = rest?;
        match now.find(['\n', '\r']) {
            None => {
                rest = None;
                Some(now)
            }
            Some(end) => {
                let skip = if now[end..].starts_with("\r\n") { 2 } else { 1 };
                rest = Some(&now[end + skip..]);
                Some(&now[..end])
            }
        }
    })
}
