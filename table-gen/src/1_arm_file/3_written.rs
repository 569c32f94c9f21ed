//! The arm file as written: its keys, with the place of every value.
//!
//! Every key is optional here, so that a missing one is reported in the words of `4_checking.rs`.

use std::fmt;

use serde::{
    Deserialize, Deserializer,
    de::{Error, SeqAccess, Visitor},
};
use toml::Spanned;

/// A value that may be missing, with its place.
pub type Written<T> = Option<Spanned<T>>;

/// The whole file.
#[derive(Deserialize)]
#[serde(deny_unknown_fields, expecting = "the sections of an arm file")]
pub struct WrittenArm {
    pub name: Written<String>,
    pub spine: Written<WrittenSpine>,
    #[serde(default)]
    pub lump: Lumps,
    pub payload: Written<WrittenPayload>,
    pub base: Written<WrittenBase>,
    pub tendons: Written<WrittenTendons>,
    pub drive: Written<WrittenDrive>,
    pub accuracy: Written<WrittenAccuracy>,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields, expecting = "a section, [spine] with its keys")]
pub struct WrittenSpine {
    pub length_m: Written<Number>,
    pub bending_stiffness_n_m2: Written<Quantity>,
    pub mass_per_length_kg_m: Written<Quantity>,
    pub rest_curvature_rad_m: Written<Quantity>,
    pub thickness_m: Written<Number>,
    pub allowed_strain: Written<Number>,
    pub damping_ratio: Written<Number>,
}

#[derive(Deserialize)]
#[serde(
    deny_unknown_fields,
    expecting = "a section, [[lump]] with at and mass_kg"
)]
pub struct WrittenLump {
    pub at: Written<Number>,
    pub mass_kg: Written<Number>,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields, expecting = "a section, [payload] with mass_kg")]
pub struct WrittenPayload {
    pub mass_kg: Written<Number>,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields, expecting = "a section, [base] with tilt_deg")]
pub struct WrittenBase {
    pub tilt_deg: Written<Number>,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields, expecting = "a section, [tendons] with its keys")]
pub struct WrittenTendons {
    pub offset_m: Written<Number>,
    pub pretension_n: Written<Number>,
    pub max_tension_n: Written<Number>,
}

#[derive(Deserialize)]
#[serde(
    deny_unknown_fields,
    expecting = "a section, [drive] with kind and setpoints"
)]
pub struct WrittenDrive {
    pub kind: Written<String>,
    pub setpoints_deg: Written<Ends>,
    pub setpoints_n_m: Written<Ends>,
}

#[derive(Default, Deserialize)]
#[serde(deny_unknown_fields, expecting = "a section, [accuracy] with its keys")]
pub struct WrittenAccuracy {
    pub angle_deg: Written<Number>,
    pub couple_percent: Written<Number>,
}

/// Any number of `[[lump]]` sections.
#[derive(Default)]
pub struct Lumps(pub Vec<Spanned<WrittenLump>>);

/// A number; whole numbers need no decimal point.
#[derive(Clone, Copy)]
pub struct Number(pub f64);

/// A quantity along the spine.
pub enum Quantity {
    Constant(f64),
    Knots(Vec<Spanned<Knot>>),
}

/// `[s, value]`.
pub struct Knot {
    pub s: Spanned<Number>,
    pub value: Spanned<Number>,
}

/// `[lowest, highest]`.
pub struct Ends {
    pub low: Spanned<Number>,
    pub high: Spanned<Number>,
}

/// Whole numbers and decimals by the same door.
macro_rules! visit_numbers {
    ($value:ty, $make:expr) => {
        fn visit_f64<E: Error>(self, number: f64) -> Result<$value, E> {
            Ok($make(number))
        }
        fn visit_i64<E: Error>(self, number: i64) -> Result<$value, E> {
            Ok($make(number as f64))
        }
        fn visit_u64<E: Error>(self, number: u64) -> Result<$value, E> {
            Ok($make(number as f64))
        }
        fn visit_i128<E: Error>(self, number: i128) -> Result<$value, E> {
            Ok($make(number as f64))
        }
        fn visit_u128<E: Error>(self, number: u128) -> Result<$value, E> {
            Ok($make(number as f64))
        }
    };
}

impl<'de> Deserialize<'de> for Number {
    fn deserialize<D: Deserializer<'de>>(from: D) -> Result<Self, D::Error> {
        struct NumberVisitor;
        impl Visitor<'_> for NumberVisitor {
            type Value = Number;
            fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
                f.write_str("a number")
            }
            visit_numbers!(Number, Number);
        }
        from.deserialize_any(NumberVisitor)
    }
}

impl<'de> Deserialize<'de> for Quantity {
    fn deserialize<D: Deserializer<'de>>(from: D) -> Result<Self, D::Error> {
        struct QuantityVisitor;
        impl<'de> Visitor<'de> for QuantityVisitor {
            type Value = Quantity;
            fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
                f.write_str("a number, or knots [[s, value], ...]")
            }
            visit_numbers!(Quantity, Quantity::Constant);
            fn visit_seq<A: SeqAccess<'de>>(self, mut seq: A) -> Result<Quantity, A::Error> {
                let mut knots = Vec::new();
                while let Some(knot) = seq.next_element()? {
                    knots.push(knot);
                }
                Ok(Quantity::Knots(knots))
            }
        }
        from.deserialize_any(QuantityVisitor)
    }
}

/// Exactly two numbers, named `expected` in messages.
struct PairVisitor {
    expected: &'static str,
}

impl<'de> Visitor<'de> for PairVisitor {
    type Value = [Spanned<Number>; 2];
    fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(self.expected)
    }
    fn visit_seq<A: SeqAccess<'de>>(self, mut seq: A) -> Result<Self::Value, A::Error> {
        let mut numbers = Vec::new();
        while let Some(number) = seq.next_element()? {
            numbers.push(number);
        }
        numbers
            .try_into()
            .map_err(|numbers: Vec<_>| A::Error::invalid_length(numbers.len(), &self))
    }
}

impl<'de> Deserialize<'de> for Knot {
    fn deserialize<D: Deserializer<'de>>(from: D) -> Result<Self, D::Error> {
        let expected = "a knot [s, value] of two numbers";
        let [s, value] = from.deserialize_any(PairVisitor { expected })?;
        Ok(Self { s, value })
    }
}

impl<'de> Deserialize<'de> for Ends {
    fn deserialize<D: Deserializer<'de>>(from: D) -> Result<Self, D::Error> {
        let expected = "two numbers [lowest, highest]";
        let [low, high] = from.deserialize_any(PairVisitor { expected })?;
        Ok(Self { low, high })
    }
}

impl<'de> Deserialize<'de> for Lumps {
    fn deserialize<D: Deserializer<'de>>(from: D) -> Result<Self, D::Error> {
        struct LumpsVisitor;
        impl<'de> Visitor<'de> for LumpsVisitor {
            type Value = Lumps;
            fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
                f.write_str("[[lump]] sections (double brackets), each with at and mass_kg")
            }
            fn visit_seq<A: SeqAccess<'de>>(self, mut seq: A) -> Result<Lumps, A::Error> {
                let mut lumps = Vec::new();
                while let Some(lump) = seq.next_element()? {
                    lumps.push(lump);
                }
                Ok(Lumps(lumps))
            }
        }
        from.deserialize_any(LumpsVisitor)
    }
}
