//! The arm file as written: its keys, with the place of every value.
//!
//! Every key is optional here, so that a missing one is reported in the words of `4_checking.rs`.

use std::{fmt, marker::PhantomData};

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
    pub lump: Repeated<WrittenLump>,
    pub payload: Written<WrittenPayload>,
    pub base: Written<WrittenBase>,
    pub tendons: Written<WrittenTendons>,
    pub drive: Written<WrittenDrive>,
    pub accuracy: Written<WrittenAccuracy>,
    pub tolerance: Written<WrittenTolerance>,
    pub require: Written<WrittenRequire>,
    #[serde(default)]
    pub keep_out: Repeated<WrittenKeepOut>,
    pub swing: Written<WrittenSwing>,
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
    pub range_kg: Written<Ends>,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields, expecting = "a section, [base] with tilt_deg")]
pub struct WrittenBase {
    pub tilt_deg: Written<Number>,
    pub tolerance_deg: Written<Number>,
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

#[derive(Deserialize)]
#[serde(
    deny_unknown_fields,
    expecting = "a section, [tolerance] with stiffness_percent"
)]
pub struct WrittenTolerance {
    pub stiffness_percent: Written<Number>,
}

#[derive(Default, Deserialize)]
#[serde(deny_unknown_fields, expecting = "a section, [require] with its keys")]
pub struct WrittenRequire {
    pub knock_n_s: Written<Number>,
    pub payload_reserve_kg: Written<Number>,
    pub stiffness_reserve_percent: Written<Number>,
    pub setpoint_reserve_deg: Written<Number>,
    pub setpoint_reserve_n_m: Written<Number>,
    pub tension_factor: Written<Number>,
    pub clearance_m: Written<Number>,
}

#[derive(Deserialize)]
#[serde(
    deny_unknown_fields,
    expecting = "a section, [[keep_out]] with name and half_plane or disc"
)]
pub struct WrittenKeepOut {
    pub name: Written<String>,
    pub half_plane: Written<WrittenHalfPlane>,
    pub disc: Written<WrittenDisc>,
}

#[derive(Deserialize)]
#[serde(
    deny_unknown_fields,
    expecting = "{ point_m = [x, y], normal = [x, y] }"
)]
pub struct WrittenHalfPlane {
    pub point_m: Written<Point>,
    pub normal: Written<Point>,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields, expecting = "{ centre_m = [x, y], radius_m = r }")]
pub struct WrittenDisc {
    pub centre_m: Written<Point>,
    pub radius_m: Written<Number>,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields, expecting = "a section, [swing] with its keys")]
pub struct WrittenSwing {
    pub max_tip_travel_deg: Written<Number>,
    pub max_tip_speed_m_s: Written<Number>,
    pub max_couple_n_m: Written<Number>,
}

/// Any number of sections in double brackets.
pub struct Repeated<T>(pub Vec<Spanned<T>>);

impl<T> Default for Repeated<T> {
    fn default() -> Self {
        Self(Vec::new())
    }
}

/// A section that may be repeated.
pub trait Repeatable {
    /// What is allowed, when something else is found.
    const EXPECTED: &'static str;
}

impl Repeatable for WrittenLump {
    const EXPECTED: &'static str = "[[lump]] sections (double brackets), each with at and mass_kg";
}

impl Repeatable for WrittenKeepOut {
    const EXPECTED: &'static str =
        "[[keep_out]] sections (double brackets), each with name and half_plane or disc";
}

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

/// `[x, y]`.
pub struct Point {
    pub x: Spanned<Number>,
    pub y: Spanned<Number>,
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

impl<'de> Deserialize<'de> for Point {
    fn deserialize<D: Deserializer<'de>>(from: D) -> Result<Self, D::Error> {
        let expected = "two numbers [x, y]";
        let [x, y] = from.deserialize_any(PairVisitor { expected })?;
        Ok(Self { x, y })
    }
}

impl<'de, T: Repeatable + Deserialize<'de>> Deserialize<'de> for Repeated<T> {
    fn deserialize<D: Deserializer<'de>>(from: D) -> Result<Self, D::Error> {
        struct RepeatedVisitor<T>(PhantomData<T>);
        impl<'de, T: Repeatable + Deserialize<'de>> Visitor<'de> for RepeatedVisitor<T> {
            type Value = Repeated<T>;
            fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
                f.write_str(T::EXPECTED)
            }
            fn visit_seq<A: SeqAccess<'de>>(self, mut seq: A) -> Result<Repeated<T>, A::Error> {
                let mut sections = Vec::new();
                while let Some(section) = seq.next_element()? {
                    sections.push(section);
                }
                Ok(Repeated(sections))
            }
        }
        from.deserialize_any(RepeatedVisitor(PhantomData))
    }
}
