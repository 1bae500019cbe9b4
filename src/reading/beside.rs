//! What was recorded beside the rig's own channels: digital edges, a payload recorder's table, a high-speed camera's table.

use super::table::{Table, TableError};

/// A change of a digital input, in trial seconds.
#[derive(Debug, Clone, PartialEq)]
pub struct EdgeSeen {
    /// Name of the device in the rig file.
    pub device: String,
    pub input: u8,
    pub rising: bool,
    pub time_s: f64,
    /// Standard uncertainty of its device's clock against the trial's other signals.
    pub time_uncertainty_s: f64,
}

/// Speeds (or specific forces along the rail) that a recorder in the payload wrote, on its own clock.
#[derive(Debug, Clone, PartialEq)]
pub struct Recorder {
    pub time_s: Vec<f64>,
    pub speed_mps: Vec<f64>,
    /// Standard uncertainty of a speed.
    pub u_speed_mps: f64,
}

/// A mark on the shuttle or payload, read off frame by frame.
#[derive(Debug, Clone, PartialEq)]
pub struct Camera {
    /// On the camera's own clock.
    pub time_s: Vec<f64>,
    pub x_m: Vec<f64>,
    /// Standard uncertainty of one reading.
    pub u_x_m: f64,
    /// Time of the frame in which the shuttle starts, where somebody saw it.
    pub release_s: Option<f64>,
}

/// Everything beside the channels; empty by default.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Beside {
    pub edges: Vec<EdgeSeen>,
    pub recorder: Option<Recorder>,
    pub camera: Option<Camera>,
}

/// How well a person reads a mark's place off a frame, where the table does not say: a tenth of marks each 100 mm
/// (common practice, no published source).
const U_MARK_M: f64 = 0.010;
/// Relative difference of a frame interval from the frame rate that is a contradiction.
const RATE_TOLERANCE: f64 = 0.01;

impl Recorder {
    /// A CSV text with the columns `time_s` and `speed_mps`, and optionally `u_speed_mps`.
    ///
    /// # Errors
    /// [`TableError`]: a column or a number is missing, time does not advance, there are fewer than five rows.
    pub fn parse(text: &str) -> Result<Self, TableError> {
        const U_SPEED_MPS: f64 = 0.1;
        let table = Table::parse(text)?;
        let (time_s, speed_mps) = (table.rising("time_s")?, table.column("speed_mps")?);
        let u = table.optional("u_speed_mps")?.unwrap_or_default();
        let u_speed_mps = u.iter().copied().fold(f64::NAN, f64::max);
        Ok(Self { time_s, speed_mps, u_speed_mps: if u_speed_mps > 0.0 { u_speed_mps } else { U_SPEED_MPS } })
    }
}

impl Camera {
    /// A CSV text with `frame` (number) or `time_s`, and `x_m` or `x_mm` of a mark along the rail; optionally `u_x_mm`.
    ///
    /// # Errors
    /// [`TableError`]: as for [`Recorder::parse`]; and where frame intervals contradict the frame rate.
    pub fn parse(text: &str, frame_rate_hz: Option<f64>, release_frame: Option<f64>) -> Result<Self, TableError> {
        let table = Table::parse(text)?;
        let frames = if table.has("frame") { Some(table.rising("frame")?) } else { None };
        let times = if table.has("time_s") { Some(table.rising("time_s")?) } else { None };
        let time_s = match (&frames, &times, frame_rate_hz) {
            (_, Some(times), None) => times.clone(),
            (Some(frames), Some(times), Some(rate_hz)) => {
                agree(frames, times, rate_hz)?;
                times.clone()
            }
            (None, Some(times), Some(rate_hz)) => {
                let counted: Vec<f64> = times.iter().map(|time_s| ((time_s - times[0]) * rate_hz).round()).collect();
                let steps = counted.windows(2).all(|pair| pair[1] > pair[0]);
                agree(if steps { &counted } else { &[] }, times, rate_hz)?;
                times.clone()
            }
            (Some(frames), None, Some(rate_hz)) => frames.iter().map(|frame| frame / rate_hz).collect(),
            (Some(_), None, None) => return Err(TableError::NoFrameRate),
            (None, None, _) => return Err(TableError::NoColumn { name: "frame or time_s" }),
        };
        let x_m = match table.has("x_mm") {
            true => table.column("x_mm")?.iter().map(|x_mm| 1e-3 * x_mm).collect(),
            false => table.column("x_m")?,
        };
        let u_mm = table.optional("u_x_mm")?.unwrap_or_default().into_iter().fold(f64::NAN, f64::max);
        let release_s = release_frame.map(|frame| match (&frames, frame_rate_hz) {
            (Some(frames), _) => at_frame(frames, &time_s, frame),
            (None, Some(rate_hz)) => time_s[0] + frame / rate_hz,
            (None, None) => f64::NAN,
        });
        let u_x_m = if u_mm > 0.0 { 1e-3 * u_mm } else { U_MARK_M };
        Ok(Self { time_s, x_m, u_x_m, release_s: release_s.filter(|time_s| time_s.is_finite()) })
    }
}

/// Time of a frame, on straight lines through the table's rows.
fn at_frame(frames: &[f64], time_s: &[f64], frame: f64) -> f64 {
    let after = frames.partition_point(|known| *known < frame).clamp(1, frames.len() - 1);
    let share = (frame - frames[after - 1]) / (frames[after] - frames[after - 1]);
    time_s[after - 1] + share * (time_s[after] - time_s[after - 1])
}

/// The median time between numbered frames must be what the frame rate says.
fn agree(frames: &[f64], time_s: &[f64], rate_hz: f64) -> Result<(), TableError> {
    let stated_ms = 1e3 / rate_hz;
    let mut intervals: Vec<f64> = if frames.len() == time_s.len() {
        frames.windows(2).zip(time_s.windows(2)).map(|(f, t)| (t[1] - t[0]) / (f[1] - f[0])).collect()
    } else {
        time_s.windows(2).map(|pair| pair[1] - pair[0]).collect()
    };
    intervals.sort_by(f64::total_cmp);
    let found_ms = 1e3 * intervals[intervals.len() / 2];
    if (found_ms / stated_ms - 1.0).abs() > RATE_TOLERANCE {
        return Err(TableError::Contradiction { found_ms, stated_ms, rate_hz });
    }
    Ok(())
}

#[cfg(test)]
mod tests {
    use super::*;

    fn frames(interval_s: f64) -> String {
        let rows: Vec<String> =
            (0..20).map(|k| format!("{k},{:.6},{:.4}", f64::from(k) * interval_s, 0.01 * f64::from(k))).collect();
        format!("frame,time_s,x_m\n{}\n", rows.join("\n"))
    }

    // 240 frames a second is 4.17 ms a frame: common practice, no published source.
    #[test]
    fn an_interval_that_contradicts_the_frame_rate_is_refused_with_both_numbers() {
        assert!(Camera::parse(&frames(1.0 / 240.0), Some(240.0), None).is_ok());
        let error = Camera::parse(&frames(1.0 / 120.0), Some(240.0), None).unwrap_err().to_string();
        assert!(error.contains("8.333") && error.contains("4.167") && error.contains("240"), "{error}");
        let untimed = "frame,x_mm\n0,0\n1,4\n2,9\n3,17\n4,30\n";
        assert!(Camera::parse(untimed, None, None).unwrap_err().to_string().contains("frame rate"));
        let camera = Camera::parse(untimed, Some(240.0), Some(2.0)).unwrap();
        assert!((camera.release_s.unwrap() - 2.0 / 240.0).abs() < 1e-12 && camera.x_m[4] == 0.03);
    }
}
