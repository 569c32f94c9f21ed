//! Numbers in messages, without the float formatting of the standard library: that one can panic as far as a linker
//! can tell, and is larger than the rest of this crate.

use core::fmt::{self, Write};

/// Writes pieces of a message one after another.
pub(crate) trait Words {
    /// Writes each piece in turn.
    fn say(&mut self, pieces: &[Word<'_>]) -> fmt::Result;
}

/// One piece of a message.
#[derive(Clone, Copy)]
pub(crate) enum Word<'a> {
    /// Text as it is.
    T(&'a str),
    /// A measured value, to five decimals.
    F(f32),
    /// A count.
    N(u32),
    /// A checksum or a byte string, in hexadecimal.
    X(u32),
}

impl Words for fmt::Formatter<'_> {
    fn say(&mut self, pieces: &[Word<'_>]) -> fmt::Result {
        for piece in pieces {
            match *piece {
                Word::T(text) => self.write_str(text)?,
                Word::F(value) => float(self, value)?,
                Word::N(value) => digits(self, value, 1)?,
                Word::X(value) => hexadecimal(self, value)?,
            }
        }
        Ok(())
    }
}

/// `value` in decimal, padded with zeros to `width` digits.
fn digits(out: &mut dyn Write, value: u32, width: u32) -> fmt::Result {
    let mut power = 1_000_000_000;
    let mut place = 10;
    let mut begun = false;
    while place > 0 {
        let digit = (value / power) % 10;
        begun |= digit != 0 || place <= width;
        if begun {
            out.write_char(char::from(b'0' + digit as u8))?;
        }
        power = (power / 10).max(1);
        place -= 1;
    }
    Ok(())
}

fn hexadecimal(out: &mut dyn Write, value: u32) -> fmt::Result {
    out.write_str("0x")?;
    for nibble in (0..8).rev() {
        let digit = (value >> (4 * nibble)) as u8 & 0xf;
        let base = if digit < 10 { b'0' } else { b'a' - 10 };
        out.write_char(char::from(base + digit))?;
    }
    Ok(())
}

/// Below this the value is written with an exponent (five decimals would show nothing of it).
const SMALL: f32 = 1e-3;
/// From here on too (the integer part would no longer be exact).
const LARGE: f32 = 1e7;

fn float(out: &mut dyn Write, value: f32) -> fmt::Result {
    if value.is_nan() {
        return out.write_str("not a number");
    }
    if value.is_sign_negative() && value != 0.0 {
        out.write_char('-')?;
    }
    let mut size = value.abs();
    if size.is_infinite() {
        return out.write_str("infinity");
    }
    // An f32 is between 1e-45 and 1e39, which bounds both loops. They stop at what five decimals round to 10 or 1.
    let (mut up, mut down) = (0, 0);
    if size >= LARGE {
        while size >= 9.999_995 && up < 50 {
            size /= 10.0;
            up += 1;
        }
    } else if size < SMALL && size > 0.0 {
        while size < 0.999_995 && down < 50 {
            size *= 10.0;
            down += 1;
        }
    }
    fixed(out, size)?;
    if up > 0 {
        out.write_char('e')?;
        digits(out, up, 1)?;
    }
    if down > 0 {
        out.write_str("e-")?;
        digits(out, down, 1)?;
    }
    Ok(())
}

/// A value in `0..1e7` with at most five decimals, trailing zeros left out.
fn fixed(out: &mut dyn Write, size: f32) -> fmt::Result {
    let mut whole = size as u32;
    let mut decimals = ((size - whole as f32) * 1e5 + 0.5) as u32;
    if decimals >= 100_000 {
        whole = whole.saturating_add(1);
        decimals = 0;
    }
    digits(out, whole, 1)?;
    if decimals > 0 {
        let mut width = 5;
        while decimals.is_multiple_of(10) && width > 1 {
            decimals /= 10;
            width -= 1;
        }
        out.write_char('.')?;
        digits(out, decimals, width)?;
    }
    Ok(())
}
