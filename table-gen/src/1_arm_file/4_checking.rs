//! From the file as written to a checked [`Arm`].

use std::{fs::File, io::Read, ops::Range, path::Path};

use toml::Spanned;

use super::{
    Accuracy, Arm, ArmFileError, Base, Drive, Lump, Payload, Profile, Spine, Tendons,
    limits::{self, Limits},
    written::{
        Ends, Number, Quantity, Written, WrittenAccuracy, WrittenArm, WrittenDrive, WrittenLump,
        WrittenPayload, WrittenSpine, WrittenTendons,
    },
};

#[path = "4_checking/1_safety.rs"]
mod safety;

/// An arm file is a page of text; what is longer is some other file (bytes).
const LONGEST_FILE: u64 = 1 << 20;

/// Default of `accuracy.angle_deg`.
const DEFAULT_ANGLE_DEG: f64 = 0.05;
/// Default of `accuracy.couple_percent`.
const DEFAULT_COUPLE_PERCENT: f64 = 0.5;

/// Reads and checks the arm file at `path`.
///
/// # Errors
/// One message for a file that cannot be read, is not TOML, or holds a value that is not allowed.
pub fn read(path: &Path) -> Result<Arm, ArmFileError> {
    let file_name = path.display().to_string();
    let unreadable = |reason: String| ArmFileError::unreadable(&file_name, reason);
    let mut bytes = Vec::new();
    File::open(path)
        .and_then(|file| file.take(LONGEST_FILE + 1).read_to_end(&mut bytes))
        .map_err(|error| unreadable(format!("cannot be read: {error}")))?;
    if bytes.len() as u64 > LONGEST_FILE {
        return Err(unreadable(
            "is longer than 1 MiB, which no arm file is".to_owned(),
        ));
    }
    let text = String::from_utf8(bytes).map_err(|error| {
        let good = error.utf8_error().valid_up_to();
        let line = error.as_bytes()[..good]
            .iter()
            .filter(|&&byte| byte == b'\n')
            .count()
            + 1;
        unreadable(format!(
            "is not UTF-8 text (byte {} of the file, on line {line})",
            good + 1
        ))
    })?;
    parse(&text, &file_name)
}

/// Checks the arm file `text`; `file_name` is for messages only.
///
/// # Errors
/// One message for text that is not TOML or holds a value that is not allowed.
pub fn parse(text: &str, file_name: &str) -> Result<Arm, ArmFileError> {
    // Spans then count from the same byte as `text` does.
    let text = text.strip_prefix('\u{feff}').unwrap_or(text);
    let page = Page { file_name, text };
    let written: WrittenArm = toml::from_str(text).map_err(|error| page.toml_fault(&error))?;
    page.arm(&written)
}

/// The text being checked.
struct Page<'a> {
    file_name: &'a str,
    text: &'a str,
}

/// One section of the page, or the part before the first section (empty name).
struct Section<'a> {
    page: &'a Page<'a>,
    name: &'a str,
    /// Where a missing key is reported.
    header: Range<usize>,
}

impl Page<'_> {
    fn fault(&self, span: Range<usize>, what: &str, found: &str, allowed: &str) -> ArmFileError {
        ArmFileError::at((self.file_name, self.text), span, what, found, allowed)
    }

    /// The text a person wrote at `span`, as the value found.
    fn found(&self, span: Range<usize>) -> String {
        format!("found {}", self.text.get(span).unwrap_or_default())
    }

    /// A fault found by `toml`, which writes "what, expected allowed": the halves go to their places
    /// and its terms for types become words.
    fn toml_fault(&self, error: &toml::de::Error) -> ArmFileError {
        let end = self.text.trim_end().len();
        let span = error.span().unwrap_or(end..end);
        let message = error.message().trim();
        let (what, allowed) = message.split_once(", expected ").unwrap_or((message, ""));
        let (what, allowed) = match what {
            _ if what.starts_with("invalid type") => {
                ("this kind of value does not go here", allowed)
            }
            _ if what.starts_with("invalid length") => ("wrong number of values", allowed),
            // Said of anything that is no TOML value, a missing one included.
            "string values must be quoted" => (
                "this is not a value",
                "a number, text in \"quotes\", or a list in [ ]",
            ),
            "duplicate key" => ("this key is there already", "each key once in its section"),
            _ => (what, allowed),
        };
        let what = what.replacen("unknown field", "unknown key", 1);
        let allowed = allowed
            .strip_prefix("one of ")
            .unwrap_or(allowed)
            .replace('`', "");
        let found = match self.text.get(span.clone()).map(str::trim) {
            None | Some("") => "here".to_owned(),
            Some(_) => self.found(span.clone()),
        };
        self.fault(span, &what, &found, &allowed)
    }

    fn section<'s, T>(
        &'s self,
        name: &'s str,
        written: &'s Written<T>,
    ) -> Result<(Section<'s>, &'s T), ArmFileError> {
        let Some(found) = self.optional(name, written) else {
            let end = self.text.trim_end().len();
            let what = format!("section [{name}] is missing");
            let allowed = "sections [spine], [payload], [base], [tendons] and [drive] must be there; \
                           [[lump]], [accuracy], [tolerance], [require], [[keep_out]] and [swing] may";
            return Err(self.fault(end..end, &what, "the file ends here", allowed));
        };
        Ok(found)
    }

    /// A section that may be missing.
    fn optional<'s, T>(
        &'s self,
        name: &'s str,
        written: &'s Written<T>,
    ) -> Option<(Section<'s>, &'s T)> {
        let section = written.as_ref()?;
        Some((
            Section {
                page: self,
                name,
                header: section.span(),
            },
            section.get_ref(),
        ))
    }

    fn arm(&self, written: &WrittenArm) -> Result<Arm, ArmFileError> {
        let name = self.name(&written.name)?;
        let spine = self.spine(written)?;
        let lumps = self.lumps(written)?;
        let (section, payload) = self.section("payload", &written.payload)?;
        let payload = section.payload(payload)?;
        let (section, base) = self.section("base", &written.base)?;
        let base = Base {
            tilt_rad: section.number(&limits::TILT, &base.tilt_deg)?.to_radians(),
            tolerance_rad: section
                .number_or(0.0, &limits::TILT_TOLERANCE, &base.tolerance_deg)?
                .to_radians(),
        };
        let (section, tendons) = self.section("tendons", &written.tendons)?;
        let tendons = section.tendons(tendons)?;
        let (section, drive) = self.section("drive", &written.drive)?;
        let drive = section.drive(drive)?;
        let accuracy = self.accuracy(&written.accuracy)?;
        let tolerance = self.tolerance(&written.tolerance)?;
        let require = self.require(&written.require, &drive, &tolerance)?;
        let keep_out = self.keep_outs(&written.keep_out, require.clearance_m)?;
        let swing = self.swing(&written.swing)?;
        let arm = Arm {
            name,
            spine,
            lumps,
            payload,
            base,
            tendons,
            drive,
            accuracy,
            tolerance,
            require,
            keep_out,
            swing,
        };
        self.weight(written, &arm)?;
        Ok(arm)
    }

    fn name(&self, written: &Written<String>) -> Result<String, ArmFileError> {
        let top = Section {
            page: self,
            name: "",
            header: 0..0,
        };
        top.name(written)
    }

    fn spine(&self, written: &WrittenArm) -> Result<Spine, ArmFileError> {
        let (section, spine) = self.section("spine", &written.spine)?;
        let length_m = section.number(&limits::LENGTH, &spine.length_m)?;
        Ok(Spine {
            length_m,
            bending_stiffness_n_m2: section
                .profile(&limits::STIFFNESS, &spine.bending_stiffness_n_m2)?,
            mass_per_length_kg_m: section
                .profile(&limits::MASS_PER_LENGTH, &spine.mass_per_length_kg_m)?,
            rest_curvature_rad_m: section.rest_curvature(spine, length_m)?,
            thickness_m: section.number(&limits::THICKNESS, &spine.thickness_m)?,
            allowed_strain: section.number(&limits::STRAIN, &spine.allowed_strain)?,
            damping_ratio: section.number(&limits::DAMPING, &spine.damping_ratio)?,
        })
    }

    fn lumps(&self, written: &WrittenArm) -> Result<Vec<Lump>, ArmFileError> {
        let lump = |lump: &Spanned<WrittenLump>| {
            let section = Section {
                page: self,
                name: "lump",
                header: lump.span(),
            };
            let lump = lump.get_ref();
            Ok(Lump {
                at: section.number(&limits::LUMP_AT, &lump.at)?,
                mass_kg: section.number(&limits::MASS, &lump.mass_kg)?,
            })
        };
        written.lump.0.iter().map(lump).collect()
    }

    fn accuracy(&self, written: &Written<WrittenAccuracy>) -> Result<Accuracy, ArmFileError> {
        let (mut angle_deg, mut couple_percent) = (DEFAULT_ANGLE_DEG, DEFAULT_COUPLE_PERCENT);
        if let Some((section, accuracy)) = self.optional("accuracy", written) {
            angle_deg = section.number_or(angle_deg, &limits::ANGLE, &accuracy.angle_deg)?;
            couple_percent =
                section.number_or(couple_percent, &limits::COUPLE, &accuracy.couple_percent)?;
        }
        Ok(Accuracy {
            angle_rad: angle_deg.to_radians(),
            couple_fraction: couple_percent / 100.0,
        })
    }

    /// What no single key shows: an arm without mass, or one whose units do not go together.
    fn weight(&self, written: &WrittenArm, arm: &Arm) -> Result<(), ArmFileError> {
        let payload = written
            .payload
            .as_ref()
            .and_then(|p| p.get_ref().mass_kg.as_ref());
        let range = written
            .payload
            .as_ref()
            .and_then(|p| p.get_ref().range_kg.as_ref());
        let stiffness = written
            .spine
            .as_ref()
            .and_then(|s| s.get_ref().bending_stiffness_n_m2.as_ref());
        if arm.total_mass_kg() <= 0.0 {
            let span = payload.map_or(0..0, Spanned::span);
            let what = "the arm has no mass: spine, lumps and payload add up to 0 kg";
            let allowed = "more than 0 kg in total";
            return Err(self.fault(span.clone(), what, &self.found(span), allowed));
        }
        let [lightest_kg, heaviest_kg] = arm.payload.range_kg;
        if arm.varied(lightest_kg, 1.0, 0.0).total_mass_kg() <= 0.0 {
            let span = range.map_or(0..0, |range| range.get_ref().low.span());
            let what = "with the lightest payload the arm has no mass: spine, lumps and payload add up to 0 kg";
            let allowed = "more than 0 kg in total";
            return Err(self.fault(span.clone(), what, &self.found(span), allowed));
        }
        let loss = arm.tolerance.stiffness_fraction;
        let corners = [
            (arm.payload.mass_kg, 1.0),
            (heaviest_kg, 1.0 - loss),
            (lightest_kg, 1.0 + loss),
        ];
        for (payload_kg, stiffness_factor) in corners {
            let corner = arm.varied(payload_kg, stiffness_factor, 0.0);
            let gamma = corner.gamma();
            if limits::GAMMA.allow(gamma) {
                continue;
            }
            let span = stiffness.map_or(0..0, Spanned::span);
            let what = format!(
                "stiffness does not go with mass {:.3e} kg and length {} m: gamma = B / (m g L^2) is {gamma:.3e}{}",
                corner.total_mass_kg(),
                arm.spine.length_m,
                if stiffness_factor == 1.0 && payload_kg == arm.payload.mass_kg {
                    ""
                } else {
                    " at an end of payload.range_kg and tolerance.stiffness_percent"
                }
            );
            let allowed = format!(
                "gamma {}; is each value in the unit its key names?",
                limits::GAMMA
            );
            return Err(self.fault(span.clone(), &what, &self.found(span), &allowed));
        }
        Ok(())
    }
}

impl Section<'_> {
    /// The key with its section, as a person would say it.
    fn full(&self, key: &str) -> String {
        if self.name.is_empty() {
            key.to_owned()
        } else {
            format!("{}.{key}", self.name)
        }
    }

    fn need<'w, T>(
        &self,
        key: &str,
        allowed: &str,
        written: &'w Written<T>,
    ) -> Result<&'w Spanned<T>, ArmFileError> {
        written.as_ref().ok_or_else(|| {
            let what = format!("key {} is missing", self.full(key));
            let found = if self.name.is_empty() {
                "not found"
            } else {
                "not in this section"
            };
            self.page.fault(
                self.header.clone(),
                &what,
                found,
                &format!("{key}: {allowed}"),
            )
        })
    }

    fn range_fault(&self, limits: &Limits, span: Range<usize>) -> ArmFileError {
        let what = format!("{} is out of range", self.full(limits.key));
        self.page.fault(
            span.clone(),
            &what,
            &self.page.found(span),
            &limits.to_string(),
        )
    }

    fn within(&self, limits: &Limits, number: &Spanned<Number>) -> Result<f64, ArmFileError> {
        let value = number.get_ref().0;
        if limits.allow(value) {
            Ok(value)
        } else {
            Err(self.range_fault(limits, number.span()))
        }
    }

    fn number(&self, limits: &Limits, written: &Written<Number>) -> Result<f64, ArmFileError> {
        self.within(limits, self.need(limits.key, &limits.to_string(), written)?)
    }

    fn number_or(
        &self,
        default: f64,
        limits: &Limits,
        written: &Written<Number>,
    ) -> Result<f64, ArmFileError> {
        match written {
            None => Ok(default),
            Some(number) => self.within(limits, number),
        }
    }

    /// A name: the arm's or a region's.
    fn name(&self, written: &Written<String>) -> Result<String, ArmFileError> {
        let allowed = format!(
            "a text in quotes of 1 to {} characters on one line, without control characters",
            limits::LONGEST_NAME
        );
        let name = self.need("name", &allowed, written)?;
        let text = name.get_ref().trim();
        let fits = !text.is_empty()
            && text.chars().count() <= limits::LONGEST_NAME
            && !text.chars().any(char::is_control);
        if fits {
            Ok(text.to_owned())
        } else {
            let what = format!("{} is not allowed", self.full("name"));
            Err(self
                .page
                .fault(name.span(), &what, &self.page.found(name.span()), &allowed))
        }
    }

    fn profile(
        &self,
        limits: &Limits,
        written: &Written<Quantity>,
    ) -> Result<Profile, ArmFileError> {
        let allowed = format!("{limits}; a number, or knots [[s, value], ...]");
        let quantity = self.need(limits.key, &allowed, written)?;
        let knots = match quantity.get_ref() {
            Quantity::Constant(value) if limits.allow(*value) => {
                return Ok(Profile::constant(*value));
            }
            Quantity::Constant(_) => return Err(self.range_fault(limits, quantity.span())),
            Quantity::Knots(knots) => knots,
        };
        let mut values: Vec<(f64, f64)> = Vec::with_capacity(knots.len());
        for knot in knots {
            let (s, value) = (&knot.get_ref().s, &knot.get_ref().value);
            let s_value = s.get_ref().0;
            if !(0.0..=1.0).contains(&s_value) {
                let what = format!("a knot of {} is off the spine", self.full(limits.key));
                let allowed = "s from 0 (base) to 1 (tip)";
                return Err(self
                    .page
                    .fault(s.span(), &what, &self.page.found(s.span()), allowed));
            }
            if let Some(&(before, _)) = values.last().filter(|last| last.0 >= s_value) {
                let what = format!("knots of {} are out of order", self.full(limits.key));
                let allowed = format!("s above {before}, the knot before it");
                return Err(self
                    .page
                    .fault(s.span(), &what, &self.page.found(s.span()), &allowed));
            }
            values.push((s_value, self.within(limits, value)?));
        }
        Profile::from_knots(values).map_err(|_| {
            let what = format!("{} has no knots", self.full(limits.key));
            self.page.fault(
                quantity.span(),
                &what,
                &self.page.found(quantity.span()),
                &allowed,
            )
        })
    }

    fn rest_curvature(&self, spine: &WrittenSpine, length_m: f64) -> Result<Profile, ArmFileError> {
        let Some(written) = &spine.rest_curvature_rad_m else {
            return Ok(Profile::constant(0.0));
        };
        let profile = self.profile(&limits::REST_CURVATURE, &spine.rest_curvature_rad_m)?;
        let most_rad_m = limits::MOST_REST_TURN_RAD / length_m;
        if profile.knots().iter().any(|knot| knot.1.abs() > most_rad_m) {
            let what = "spine.rest_curvature_rad_m rolls the spine up at rest";
            let allowed =
                format!("up to {most_rad_m:.3} rad/m either way: two full turns over the length");
            let span = written.span();
            return Err(self
                .page
                .fault(span.clone(), what, &self.page.found(span), &allowed));
        }
        Ok(profile)
    }

    fn payload(&self, payload: &WrittenPayload) -> Result<Payload, ArmFileError> {
        let mass_kg = self.number(&limits::MASS, &payload.mass_kg)?;
        let Some(range) = &payload.range_kg else {
            return Ok(Payload {
                mass_kg,
                range_kg: [mass_kg; 2],
            });
        };
        let low = self.within(&limits::PAYLOAD_RANGE, &range.get_ref().low)?;
        let high = self.within(&limits::PAYLOAD_RANGE, &range.get_ref().high)?;
        if low <= mass_kg && mass_kg <= high {
            return Ok(Payload {
                mass_kg,
                range_kg: [low, high],
            });
        }
        let what = if low <= high {
            "payload.range_kg does not contain the payload"
        } else {
            "payload.range_kg is not a range"
        };
        let allowed = format!("[lowest, highest] around mass_kg, {mass_kg} kg");
        let found = self.page.found(range.span());
        Err(self.page.fault(range.span(), what, &found, &allowed))
    }

    fn tendons(&self, tendons: &WrittenTendons) -> Result<Tendons, ArmFileError> {
        let offset_m = self.number(&limits::OFFSET, &tendons.offset_m)?;
        let pretension_n = self.number(&limits::PRETENSION, &tendons.pretension_n)?;
        let max_tension_n = self.number(&limits::MAX_TENSION, &tendons.max_tension_n)?;
        if max_tension_n <= pretension_n {
            let span = tendons
                .max_tension_n
                .as_ref()
                .map_or(self.header.clone(), Spanned::span);
            let what = "tendons.max_tension_n is not above the pretension";
            let allowed = format!("more than pretension_n, {pretension_n} N");
            return Err(self
                .page
                .fault(span.clone(), what, &self.page.found(span), &allowed));
        }
        Ok(Tendons {
            offset_m,
            pretension_n,
            max_tension_n,
        })
    }

    fn drive(&self, drive: &WrittenDrive) -> Result<Drive, ArmFileError> {
        const KINDS: &str = "\"held-tip\" (setpoints_deg) or \"applied-couple\" (setpoints_n_m)";
        let kind = self.need("kind", KINDS, &drive.kind)?;
        let (angles, couples) = (&drive.setpoints_deg, &drive.setpoints_n_m);
        match kind.get_ref().as_str() {
            "held-tip" => {
                self.only(&limits::SETPOINTS_DEG, couples, "held-tip")?;
                let ends_deg = self.ends(&limits::SETPOINTS_DEG, angles)?;
                Ok(Drive::HeldTip {
                    setpoints_rad: ends_deg.map(f64::to_radians),
                })
            }
            "applied-couple" => {
                self.only(&limits::SETPOINTS_N_M, angles, "applied-couple")?;
                let setpoints_n_m = self.ends(&limits::SETPOINTS_N_M, couples)?;
                Ok(Drive::AppliedCouple { setpoints_n_m })
            }
            _ => {
                let span = kind.span();
                let found = self.page.found(span.clone());
                Err(self
                    .page
                    .fault(span, "drive.kind is not known", &found, KINDS))
            }
        }
    }

    /// The setpoints of the other drive kind must not be there.
    fn only(&self, right: &Limits, wrong: &Written<Ends>, kind: &str) -> Result<(), ArmFileError> {
        let Some(wrong) = wrong else { return Ok(()) };
        let what = format!("these setpoints do not belong to drive kind \"{kind}\"");
        let allowed = format!(
            "only {} = [lowest, highest], each {right}, with \"{kind}\"",
            right.key
        );
        Err(self.page.fault(
            wrong.span(),
            &what,
            &self.page.found(wrong.span()),
            &allowed,
        ))
    }

    fn ends(&self, limits: &Limits, written: &Written<Ends>) -> Result<[f64; 2], ArmFileError> {
        let allowed = format!("[lowest, highest], each {limits}");
        let ends = self.need(limits.key, &allowed, written)?;
        let low = self.within(limits, &ends.get_ref().low)?;
        let high = self.within(limits, &ends.get_ref().high)?;
        if low < high {
            return Ok([low, high]);
        }
        let what = format!("{} is not a range", self.full(limits.key));
        let allowed = format!("{allowed}, lowest below highest");
        Err(self
            .page
            .fault(ends.span(), &what, &self.page.found(ends.span()), &allowed))
    }
}
