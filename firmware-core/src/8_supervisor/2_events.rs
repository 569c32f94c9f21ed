//! What the supervisor notices, one bit each.

use core::fmt;

use serde::Serialize;

use crate::words::Word::T;
use crate::words::Words;

/// A set of events.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize)]
pub struct Events(u32);

/// Defines the constants and their names in one place.
macro_rules! events {
    ($($(#[$doc:meta])* $name:ident = $bit:literal, $words:literal;)*) => {
        impl Events {
            $($(#[$doc])* pub const $name: Self = Self(1 << $bit);)*

            /// Every event with its name in words.
            pub const ALL: &'static [(Self, &'static str)] = &[$((Self::$name, $words)),*];
        }
    };
}

events! {
    /// The arm went from the branch it was on to another without being told to.
    KNOCKED_OVER = 0, "knocked over";
    /// The pose belongs to no known branch. Stops.
    NO_KNOWN_BRANCH = 1, "on no known branch";
    /// The tip is not where it is told to be. Stops.
    SETPOINT_NOT_REACHED = 2, "setpoint not reached";
    /// A reading repeats although it should change. Stops.
    SENSOR_FROZEN = 3, "sensor frozen";
    /// A reading is beyond what the arm can do. Stops.
    SENSOR_OUT_OF_RANGE = 4, "sensor out of range";
    /// A reading is not a finite number. Stops.
    SENSOR_NOT_FINITE = 5, "sensor not finite";
    /// A reading jumped and stays away. Stops.
    SENSOR_JUMPED = 6, "sensor jumped";
    /// A tension differs from what was commanded: broken or jammed. Stops.
    TENSION_NOT_FOLLOWING = 7, "tension not following";
    /// A tendon carries next to nothing: slack or broken. Stops.
    TENDON_SLACK = 8, "tendon slack";
    /// A time step was far from the nominal one. Stops when it goes on.
    TIME_IRREGULAR = 9, "time step irregular";
    /// The caller asked to stop.
    STOP_REQUESTED = 10, "stop requested";
    /// A request value is not a finite number, or the payload is not in the table; the setpoint stays where it is.
    REQUEST_UNUSABLE = 11, "request unusable";
    /// A survey has ended and fits.
    SURVEY_FITS = 12, "survey fits";
    /// A survey has ended and forbids the crossing.
    SURVEY_REFUSED = 13, "survey refused";
    /// A crossing has begun.
    CROSSING_BEGUN = 14, "crossing begun";
    /// The arm has passed to the wanted side.
    PASSED_OVER = 15, "passed over";
    /// The arm rests on the wanted branch after a crossing.
    CROSSING_DONE = 16, "crossing done";
    /// The arm came back to rest on the side it started from.
    FELL_BACK = 17, "fell back";
    /// A crossing or the braking after it took too long. Stops.
    TIMED_OUT = 18, "timed out";
    /// A limit of the plan was broken: tip travel, tip speed or energy. Stops.
    LIMIT_BROKEN = 19, "limit of the plan broken";
    /// Permission was withdrawn, or the wanted branch or the payload changed, during a crossing. Stops.
    PERMISSION_WITHDRAWN = 20, "permission withdrawn";
    /// The arm is over and may not stay where it is, and no crossing back is permitted and planned. Stops.
    NO_WAY_BACK = 21, "no way back";
    /// Stopped has been left.
    REARMED = 22, "armed";
    /// Arming was asked for and did not become possible in time.
    REARM_REFUSED = 23, "arming refused";
    /// The couple asked for was cut to what the tendons may make.
    COUPLE_LIMITED = 24, "couple limited";
    /// The table no longer decodes: its memory has changed. Stops.
    TABLE_BROKEN = 25, "table broken";
}

impl Events {
    /// No event.
    pub const NONE: Self = Self(0);

    /// Whether every event of `other` is in this set.
    pub const fn contains(self, other: Self) -> bool {
        self.0 & other.0 == other.0
    }

    /// Whether any event of `other` is in this set.
    pub const fn any(self, other: Self) -> bool {
        self.0 & other.0 != 0
    }

    /// Whether there is none.
    pub const fn is_empty(self) -> bool {
        self.0 == 0
    }

    /// Both sets together.
    #[must_use]
    pub const fn with(self, other: Self) -> Self {
        Self(self.0 | other.0)
    }

    /// This set without the events of `other`.
    #[must_use]
    pub const fn without(self, other: Self) -> Self {
        Self(self.0 & !other.0)
    }

    /// One bit for each event, for a log or a wire.
    pub const fn bits(self) -> u32 {
        self.0
    }

    /// From [`Self::bits`]; bits that stand for nothing are dropped.
    pub fn from_bits(bits: u32) -> Self {
        let known = Self::ALL.iter().fold(0, |bits, (event, _)| bits | event.0);
        Self(bits & known)
    }

    /// The names of the events in the set.
    pub fn names(self) -> impl Iterator<Item = &'static str> {
        Self::ALL
            .iter()
            .filter(move |(event, _)| self.contains(*event))
            .map(|(_, name)| *name)
    }
}

impl core::ops::BitOrAssign for Events {
    fn bitor_assign(&mut self, other: Self) {
        self.0 |= other.0;
    }
}

impl fmt::Display for Events {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        for (number, name) in self.names().enumerate() {
            if number > 0 {
                f.say(&[T(", ")])?;
            }
            f.say(&[T(name)])?;
        }
        Ok(())
    }
}
