//! Arrays in the form of NumPy (NumPy Enhancement Proposal 1): `numpy.load(FILE, mmap_mode="r")` opens one of any size.

use std::io::{self, Write};

/// Writes the head of an array of doubles, little end first, last index fastest; the numbers follow.
pub fn head(to: &mut impl Write, shape: &[u64]) -> io::Result<()> {
    head_of("<f8", to, shape)
}

/// The same of an array of complex doubles: each is its real part, then its imaginary one.
pub fn head_complex(to: &mut impl Write, shape: &[u64]) -> io::Result<()> {
    head_of("<c16", to, shape)
}

fn head_of(kind: &str, to: &mut impl Write, shape: &[u64]) -> io::Result<()> {
    let sizes: String = shape.iter().map(|size| format!("{size}, ")).collect();
    let mut text = format!("{{'descr': '{kind}', 'fortran_order': False, 'shape': ({}), }}", sizes.trim_end());
    // magic, version, length and text fill a multiple of 64 bytes
    let short = 64 - (10 + text.len() + 1) % 64;
    text.extend(std::iter::repeat_n(' ', short % 64));
    text.push('\n');
    to.write_all(b"\x93NUMPY\x01\x00")?;
    to.write_all(&(text.len() as u16).to_le_bytes())?;
    to.write_all(text.as_bytes())
}

/// Writes numbers.
pub fn numbers(to: &mut impl Write, numbers: &[f64]) -> io::Result<()> {
    numbers.iter().try_for_each(|number| to.write_all(&number.to_le_bytes()))
}

#[cfg(test)]
mod tests {
    #[test]
    fn exact_head_is_aligned_and_says_the_shape() {
        for shape in [vec![3], vec![10, 500, 4], vec![1_000_000_000_000, 7]] {
            let mut bytes = Vec::new();
            super::head(&mut bytes, &shape).expect("a list can be written to");
            assert_eq!(bytes.len() % 64, 0);
            let text = String::from_utf8_lossy(&bytes[10..]).into_owned();
            let sizes: Vec<String> = shape.iter().map(u64::to_string).collect();
            let wanted = if shape.len() == 1 { format!("({},)", sizes[0]) } else { format!("({},)", sizes.join(", ")) };
            assert!(text.contains(&wanted), "{text}");
        }
    }
}
