//! When to look for a train while there is none: soon and on little audio when something has begun, ever more seldom and on more
//! audio while nothing is found. Looking is the only dear thing a watch does.

/// Audio of the first look, s, and the factor from look to look.
const FIRST_S: f64 = 0.75;
const GROWTH: f64 = 1.3;
/// Longest look, s.
const LONGEST_S: f64 = 60.0;
/// While nothing is found, the last seconds are looked at every so many seconds.
const BESIDES_S: f64 = 4.0;
/// Step of the median peak (natural log) that begins the looks anew, and step of the largest peak over the largest of late, which
/// fades by so much a second: slow clicks are no news each time.
const MEDIAN_STEP: f64 = 0.25;
const PEAK_STEP: f64 = 0.7;
const FADES: f64 = 0.1;
/// Least time between two such beginnings, s; doubled each time in vain up to the last.
const PAUSE_S: (f64, f64) = (2.0, 16.0);
/// Length of the blocks whose peaks are the activity, s; share of a new value in its usual level.
const BLOCK_S: f64 = 0.025;
const NEW_SHARE: f64 = 0.1;

/// The plan of looks.
#[derive(Debug, Clone)]
pub struct Looks {
    since_s: f64,
    next_s: f64,
    besides_s: f64,
    /// Usual median peak and largest peak of late, natural logs.
    usual: Option<[f64; 2]>,
    begun_s: f64,
    pause_s: f64,
}

impl Looks {
    /// A plan for audio from a time on, s.
    #[must_use]
    pub fn new(since_s: f64) -> Self {
        Self {
            since_s,
            next_s: FIRST_S,
            besides_s: since_s + 2.0 * BESIDES_S,
            usual: None,
            begun_s: since_s,
            pause_s: PAUSE_S.0,
        }
    }

    /// Takes the samples of a step that ends at `now_s`; says from which time on to look now, s, if at all.
    pub fn step(&mut self, now_s: f64, fresh: &[f32], rate_hz: f64) -> Option<f64> {
        let activity = activity(fresh, rate_hz);
        let step_s = fresh.len() as f64 / rate_hz;
        let [median, largest] = activity;
        let usual = *self.usual.get_or_insert(activity);
        self.usual = Some([usual[0] + NEW_SHARE * (median - usual[0]), largest.max(usual[1] - FADES * step_s)]);
        let other = (median - usual[0]).abs() > MEDIAN_STEP || largest - usual[1] > PEAK_STEP;
        if other && now_s - self.begun_s > self.pause_s {
            self.since_s = now_s - step_s;
            self.next_s = FIRST_S;
            self.begun_s = now_s;
            self.pause_s = (2.0 * self.pause_s).min(PAUSE_S.1);
            self.usual = Some(activity);
        }
        let heard_s = now_s - self.since_s;
        if heard_s >= self.next_s {
            if self.next_s >= LONGEST_S {
                // From now on a look over everything that is held, at a third of its length.
                self.since_s = now_s - 2.0 / 3.0 * LONGEST_S;
            }
            self.next_s = (GROWTH * self.next_s).min(LONGEST_S);
            return Some(now_s - heard_s.min(LONGEST_S));
        }
        if now_s >= self.besides_s {
            self.besides_s = now_s + BESIDES_S;
            if self.next_s > 2.0 * BESIDES_S {
                return Some(now_s - BESIDES_S);
            }
        }
        None
    }
}

/// Natural logs of the median and of the largest peak of short blocks of the differenced samples.
fn activity(fresh: &[f32], rate_hz: f64) -> [f64; 2] {
    let block = ((BLOCK_S * rate_hz) as usize).max(2);
    let mut peaks: Vec<f32> =
        fresh.chunks(block).map(|c| c.windows(2).fold(0.0f32, |m, w| m.max((w[1] - w[0]).abs()))).collect();
    peaks.sort_by(f32::total_cmp);
    let ln = |peak: Option<&f32>| f64::from(peak.map_or(0.0, |p| *p).max(1e-6)).ln();
    [ln(peaks.get(peaks.len() / 2)), ln(peaks.last())]
}
