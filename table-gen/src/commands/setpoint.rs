//! The setpoint that a question is about, as options.

use table_gen::rest_states::listing::Question;

#[derive(clap::Args)]
#[group(required = true, multiple = false)]
pub struct Setpoint {
    /// Tip angle held, in degrees from the base tangent, within 720 either way.
    #[arg(long, value_name = "X", allow_hyphen_values = true, value_parser = tip_angle_deg)]
    hold_tip_deg: Option<f64>,
    /// Couple applied to the tip, in N m, within 100000 either way.
    #[arg(long, value_name = "X", allow_hyphen_values = true, value_parser = couple_n_m)]
    couple_n_m: Option<f64>,
}

fn tip_angle_deg(text: &str) -> Result<f64, String> {
    within(text, 720.0)
}

fn couple_n_m(text: &str) -> Result<f64, String> {
    within(text, 1e5)
}

fn within(text: &str, most: f64) -> Result<f64, String> {
    match text.parse::<f64>() {
        Ok(value) if value.abs() <= most => Ok(value),
        _ => Err(format!("a number from -{most} to {most} is allowed")),
    }
}

impl Setpoint {
    /// The question in SI.
    pub fn question(&self) -> Question {
        match (self.hold_tip_deg, self.couple_n_m) {
            (Some(angle_deg), _) => Question::HoldTip(angle_deg.to_radians()),
            (None, couple) => Question::Couple(couple.expect("one of the two is required")),
        }
    }
}
