//! The checks of what may vary, which reserves must remain, where the arm must not be, and how far a
//! swing may go.

use toml::Spanned;

use super::{Page, Section};
use crate::arm_file::{
    ArmFileError, Drive, KeepOut, Region, Require, Swing, Tolerance,
    limits::{self, Limits},
    written::{
        Number, Point, Repeated, Written, WrittenDisc, WrittenHalfPlane, WrittenKeepOut,
        WrittenRequire, WrittenSwing, WrittenTolerance,
    },
};

impl Page<'_> {
    pub(super) fn tolerance(
        &self,
        written: &Written<WrittenTolerance>,
    ) -> Result<Tolerance, ArmFileError> {
        let Some((section, tolerance)) = self.optional("tolerance", written) else {
            return Ok(Tolerance::default());
        };
        let limits = &limits::STIFFNESS_TOLERANCE;
        let percent = section.number_or(0.0, limits, &tolerance.stiffness_percent)?;
        Ok(Tolerance {
            stiffness_fraction: percent / 100.0,
        })
    }

    pub(super) fn require(
        &self,
        written: &Written<WrittenRequire>,
        drive: &Drive,
        tolerance: &Tolerance,
    ) -> Result<Require, ArmFileError> {
        let default = Require::default_for(drive);
        let Some((section, require)) = self.optional("require", written) else {
            return Ok(default);
        };
        Ok(Require {
            knock_n_s: section.number_or(default.knock_n_s, &limits::KNOCK, &require.knock_n_s)?,
            payload_reserve_kg: section.number_or(
                default.payload_reserve_kg,
                &limits::PAYLOAD_RESERVE,
                &require.payload_reserve_kg,
            )?,
            stiffness_reserve_fraction: section.stiffness_reserve(require, tolerance)?,
            setpoint_reserve: section.setpoint_reserve(require, drive, &default)?,
            tension_factor: section.number_or(
                default.tension_factor,
                &limits::TENSION_FACTOR,
                &require.tension_factor,
            )?,
            clearance_m: section.number_or(
                default.clearance_m,
                &limits::CLEARANCE,
                &require.clearance_m,
            )?,
        })
    }

    pub(super) fn keep_outs(
        &self,
        written: &Repeated<WrittenKeepOut>,
        clearance_m: f64,
    ) -> Result<Vec<KeepOut>, ArmFileError> {
        let mut keep_outs: Vec<KeepOut> = Vec::with_capacity(written.0.len());
        for keep_out in &written.0 {
            let section = Section {
                page: self,
                name: "keep_out",
                header: keep_out.span(),
            };
            let keep_out = keep_out.get_ref();
            let name = section.name(&keep_out.name)?;
            if keep_outs.iter().any(|other| other.name == name) {
                let span = keep_out.name.as_ref().map_or(0..0, Spanned::span);
                let what = "keep_out.name is there already";
                let allowed = "a name that no other [[keep_out]] has";
                return Err(self.fault(span.clone(), what, &self.found(span), allowed));
            }
            let region = section.region(keep_out, clearance_m)?;
            keep_outs.push(KeepOut { name, region });
        }
        Ok(keep_outs)
    }

    pub(super) fn swing(
        &self,
        written: &Written<WrittenSwing>,
    ) -> Result<Option<Swing>, ArmFileError> {
        let Some((section, swing)) = self.optional("swing", written) else {
            return Ok(None);
        };
        Ok(Some(Swing {
            max_tip_travel_rad: section
                .number(&limits::TIP_TRAVEL, &swing.max_tip_travel_deg)?
                .to_radians(),
            max_tip_speed_m_s: section.number(&limits::TIP_SPEED, &swing.max_tip_speed_m_s)?,
            max_couple_n_m: section.number(&limits::SWING_COUPLE, &swing.max_couple_n_m)?,
        }))
    }
}

impl Section<'_> {
    fn stiffness_reserve(
        &self,
        require: &WrittenRequire,
        tolerance: &Tolerance,
    ) -> Result<f64, ArmFileError> {
        let Some(written) = &require.stiffness_reserve_percent else {
            return Ok(0.0);
        };
        let fraction = self.within(&limits::STIFFNESS_RESERVE, written)? / 100.0;
        if fraction + tolerance.stiffness_fraction < 1.0 {
            return Ok(fraction);
        }
        let what = "no stiffness is left after the tolerance and this reserve";
        let allowed = format!(
            "less than {} percent, for tolerance.stiffness_percent takes the rest",
            100.0 * (1.0 - tolerance.stiffness_fraction)
        );
        let span = written.span();
        let found = self.page.found(span.clone());
        Err(self.page.fault(span, what, &found, &allowed))
    }

    fn setpoint_reserve(
        &self,
        require: &WrittenRequire,
        drive: &Drive,
        default: &Require,
    ) -> Result<f64, ArmFileError> {
        let (degrees, couple) = (&require.setpoint_reserve_deg, &require.setpoint_reserve_n_m);
        match drive {
            Drive::HeldTip { .. } => {
                self.only_reserve(&limits::SETPOINT_RESERVE_DEG, couple, "held-tip")?;
                match degrees {
                    None => Ok(default.setpoint_reserve),
                    Some(degrees) => Ok(self
                        .within(&limits::SETPOINT_RESERVE_DEG, degrees)?
                        .to_radians()),
                }
            }
            Drive::AppliedCouple { .. } => {
                self.only_reserve(&limits::SETPOINT_RESERVE_N_M, degrees, "applied-couple")?;
                self.number_or(
                    default.setpoint_reserve,
                    &limits::SETPOINT_RESERVE_N_M,
                    couple,
                )
            }
        }
    }

    /// The setpoint reserve of the other drive kind must not be there.
    fn only_reserve(
        &self,
        right: &Limits,
        wrong: &Written<Number>,
        kind: &str,
    ) -> Result<(), ArmFileError> {
        let Some(wrong) = wrong else { return Ok(()) };
        let what = format!("this setpoint reserve does not belong to drive kind \"{kind}\"");
        let allowed = format!("only {}, {right}, with \"{kind}\"", right.key);
        let found = self.page.found(wrong.span());
        Err(self.page.fault(wrong.span(), &what, &found, &allowed))
    }

    /// The region of one keep-out; one that the base itself is in, or too near, would forbid
    /// everything.
    fn region(&self, keep_out: &WrittenKeepOut, clearance_m: f64) -> Result<Region, ArmFileError> {
        const ALLOWED: &str = "one of half_plane = { point_m = [x, y], normal = [x, y] } \
                               or disc = { centre_m = [x, y], radius_m = r }";
        let half_plane = self
            .page
            .optional("keep_out.half_plane", &keep_out.half_plane);
        let disc = self.page.optional("keep_out.disc", &keep_out.disc);
        let (header, region) = match (half_plane, disc) {
            (Some((section, half_plane)), None) => {
                let region = section.half_plane(half_plane)?;
                (section.header, region)
            }
            (None, Some((section, disc))) => {
                let region = section.disc(disc)?;
                (section.header, region)
            }
            (None, None) => {
                let what = "this keep-out has no region";
                let header = self.header.clone();
                return Err(self
                    .page
                    .fault(header, what, "not in this section", ALLOWED));
            }
            (Some((first, _)), Some((second, _))) => {
                let span = if first.header.start < second.header.start {
                    second.header
                } else {
                    first.header
                };
                let found = self.page.found(span.clone());
                let what = "this keep-out has two regions";
                return Err(self.page.fault(span, what, &found, ALLOWED));
            }
        };
        let at_base_m = region.clearance_m([0.0, 0.0]);
        if at_base_m >= clearance_m {
            return Ok(region);
        }
        let what = if at_base_m < 0.0 {
            "this keep-out contains the base, so that the arm could be nowhere"
        } else {
            "the base is too near to this keep-out, so that the arm could be nowhere"
        };
        let allowed = format!(
            "regions at least require.clearance_m, {clearance_m} m, from the base at [0, 0]; \
             this one: {at_base_m:.3} m"
        );
        let found = self.page.found(header.clone());
        Err(self.page.fault(header, what, &found, &allowed))
    }

    fn half_plane(&self, half_plane: &WrittenHalfPlane) -> Result<Region, ArmFileError> {
        let point_m = self.point(&limits::POINT, &half_plane.point_m)?;
        let [x, y] = self.point(&limits::NORMAL, &half_plane.normal)?;
        let largest = x.abs().max(y.abs());
        if largest == 0.0 {
            let span = half_plane.normal.as_ref().map_or(0..0, Spanned::span);
            let what = "keep_out.half_plane.normal has no direction";
            let allowed = "[x, y], not both 0; it points to the allowed side";
            let found = self.page.found(span.clone());
            return Err(self.page.fault(span, what, &found, allowed));
        }
        // Very small components would lose digits in the length.
        let (x, y) = (x / largest, y / largest);
        let length = x.hypot(y);
        Ok(Region::HalfPlane {
            point_m,
            normal: [x / length, y / length],
        })
    }

    fn disc(&self, disc: &WrittenDisc) -> Result<Region, ArmFileError> {
        Ok(Region::Disc {
            centre_m: self.point(&limits::CENTRE, &disc.centre_m)?,
            radius_m: self.number(&limits::RADIUS, &disc.radius_m)?,
        })
    }

    fn point(&self, limits: &Limits, written: &Written<Point>) -> Result<[f64; 2], ArmFileError> {
        let point = self.need(limits.key, &format!("[x, y], each {limits}"), written)?;
        let Point { x, y } = point.get_ref();
        Ok([self.within(limits, x)?, self.within(limits, y)?])
    }
}
