//! How a run goes: what is told while it does, and the line at the bottom of the terminal.

use crate::screen::{Screen, Width};
use crate::text::{amount, counted, duration, fit, wide};
use serde_json::json;
use spinledger_engine::Study;
use spinledger_engine::run::Notice;
use std::collections::{BTreeSet, VecDeque};
use std::time::{Duration, Instant};

/// The rate is that of so long ago until now.
const WINDOW: Duration = Duration::from_secs(10);
/// How often it is looked at.
const SAMPLE_EVERY: Duration = Duration::from_millis(500);
/// Before that, and before this part of what is due is done, what is left is a guess and not told.
const TOLD_AFTER: Duration = Duration::from_secs(2);
const TOLD_FROM: f64 = 0.02;
/// Where no spin was updated for so long, no sampling goes on.
const IDLE: Duration = Duration::from_secs(2);
/// Less than this is not worth a word.
const LEAST_LEFT: f64 = 1.0;
/// Room that what is being worked on should have, at least.
const WORK: usize = 12;

/// How the run goes.
pub(super) struct Progress {
    started: Instant,
    /// Updates due, as far as planned, and done.
    due: f64,
    done: f64,
    /// Parcels done and planned.
    parcels: (u64, u64),
    working: Vec<String>,
    /// Steps that are not planned yet, in order.
    to_come: Vec<String>,
    /// Updates done at some times, oldest first.
    past: VecDeque<(Instant, f64)>,
    /// When the last updates were told.
    moved: Instant,
    stopping: bool,
}

impl Progress {
    /// At the beginning, of all steps or of one and those that it needs.
    pub(super) fn new(study: &Study, only: Option<&str>) -> Self {
        let started = Instant::now();
        let steps = &study.pipeline.steps;
        let mut wanted: BTreeSet<&str> =
            only.map_or_else(|| steps.iter().map(|s| s.name.as_str()).collect(), |o| [o].into());
        // Steps stand in the order in which they run: whoever needs one stands behind it.
        for step in steps.iter().rev() {
            if wanted.contains(step.name.as_str()) {
                wanted.extend(step.needs.iter().map(String::as_str));
            }
        }
        let to_come = steps.iter().map(|step| &step.name).filter(|name| wanted.contains(name.as_str()));
        Progress {
            started,
            due: 0.0,
            done: 0.0,
            parcels: (0, 0),
            working: Vec::new(),
            to_come: to_come.cloned().collect(),
            past: VecDeque::from([(started, 0.0)]),
            moved: started,
            stopping: false,
        }
    }

    /// Seconds since the beginning.
    pub(super) fn seconds(&self) -> f64 {
        self.started.elapsed().as_secs_f64()
    }

    /// Attempted spin updates done.
    pub(super) fn updates(&self) -> f64 {
        self.done
    }

    /// Takes note of what goes on, and tells it.
    pub(super) fn tell(&mut self, notice: &Notice<'_>, screen: &mut Screen) {
        match notice {
            Notice::Planned { step, parcels, recorded, updates } => {
                self.due += updates;
                self.parcels.1 += parcels - recorded;
                self.to_come.retain(|name| name != step);
                screen.event(&json!({ "event": "planned", "step": step, "parcels": parcels, "recorded": recorded }));
                let due = parcels - recorded;
                let what = match (due, recorded) {
                    (0, _) => format!("{}, all on record", counted(*parcels, "parcel")),
                    (_, 0) => format!("{} due", counted(*parcels, "parcel")),
                    _ => format!("{}, {recorded} on record, {due} due", counted(*parcels, "parcel")),
                };
                screen.tell(&format!("{step}: {what}"));
            }
            Notice::Started { step, parcel } => {
                self.working.push(format!("{step} {parcel}"));
                screen.event(&json!({ "event": "started", "step": step, "parcel": parcel }));
            }
            Notice::Progress { updates } => {
                self.done += *updates as f64;
                if *updates > 0 {
                    self.moved = Instant::now();
                }
            }
            Notice::Done { step, parcel, computed } => {
                self.leave(step, parcel);
                screen.event(&json!({ "event": "done", "step": step, "parcel": parcel, "computed": computed }));
            }
            Notice::Broken { step, parcel, message } => {
                // A step that breaks as a whole has no parcels that were counted.
                if !parcel.is_empty() {
                    self.leave(step, parcel);
                }
                let event = json!({ "event": "broken", "step": step, "parcel": parcel, "message": message });
                screen.event(&event);
                let place = if parcel.is_empty() { (*step).to_owned() } else { format!("{step}, {parcel}") };
                screen.trouble(&format!("broken: {place}:\n  {}", message.replace('\n', "\n  ")));
            }
            Notice::Complete { step, counts } => {
                screen.event(&json!({ "event": "complete", "step": step, "counts": counts }));
            }
            Notice::Left { step } => {
                self.to_come.retain(|name| name != step);
                screen.event(&json!({ "event": "left", "step": step }));
                screen.tell(&format!("{step}: left due, since something that it needs is broken"));
            }
            Notice::Stopping => {
                self.working.clear();
                self.stopping = true;
                screen.event(&json!({ "event": "stopping" }));
                screen.tell("stopping: blocks in flight are being put on record (once more ends at once)");
            }
            Notice::Warning(text) => {
                screen.event(&json!({ "event": "warning", "text": text }));
                if !screen.is_json() {
                    screen.trouble(&format!("warning: {text}"));
                }
            }
        }
        let now = Instant::now();
        if self.past.back().is_none_or(|(last, _)| now - *last >= SAMPLE_EVERY) {
            self.past.push_back((now, self.done));
            while self.past.len() > 2 && now - self.past[1].0 > WINDOW {
                self.past.pop_front();
            }
        }
        screen.bottom(|width| self.words(width));
    }

    fn leave(&mut self, step: &str, parcel: &str) {
        self.parcels.0 += 1;
        let words = format!("{step} {parcel}");
        if let Some(at) = self.working.iter().position(|w| *w == words) {
            self.working.remove(at);
        }
    }

    fn words(&self, width: Width) -> String {
        let now = Instant::now();
        let rate = self.past.front().map_or(0.0, |(then, done)| {
            let seconds = (now - *then).as_secs_f64();
            if seconds > 0.5 && now - self.moved < IDLE { (self.done - done) / seconds } else { 0.0 }
        });
        let open = self.due - self.done;
        let meaningful = now - self.started > TOLD_AFTER && self.done > TOLD_FROM * self.due && rate > 0.0;
        let left = Some(open / rate).filter(|left| meaningful && *left >= LEAST_LEFT);
        let state = Now {
            parcels: self.parcels,
            rate: Some(rate).filter(|rate| *rate > 0.0 && open > 0.0),
            left,
            then: &self.to_come,
            working: self.working.first().map_or("", |working| working.trim_end()),
            stopping: self.stopping,
        };
        state.words(width)
    }
}

/// What the line at the bottom says.
struct Now<'a> {
    parcels: (u64, u64),
    /// Attempted spin updates a second.
    rate: Option<f64>,
    /// Seconds of sampling.
    left: Option<f64>,
    /// Steps to come.
    then: &'a [String],
    working: &'a str,
    stopping: bool,
}

impl Now<'_> {
    /// The most that there is room for: parcels first, then what is left, the rate, what is being worked on, what comes then.
    fn words(&self, width: Width) -> String {
        let room = width.columns().unwrap_or(usize::MAX);
        let (done, all) = self.parcels;
        if self.stopping {
            return fit("stopping", room);
        }
        let rate = self.rate.map(amount);
        let left = self.left.map(duration);
        let some = |text: &Option<String>, before: &str, behind: &str| {
            text.as_ref().map_or(String::new(), |text| format!("{before}{text}{behind}"))
        };
        let then = (!self.then.is_empty()).then(|| self.then.join(", "));
        let long =
            format!("{done} of {all} parcels{}{}", some(&rate, ", ", " updates/s"), some(&left, ", about ", " left"));
        let forms = [
            format!("{long}{}", some(&then, ", then ", "")),
            long,
            format!("{done} of {all}{}{}", some(&rate, ", ", "/s"), some(&left, ", ", " left")),
            format!("{done} of {all}{}", some(&left, ", ", " left")),
            format!("{done}/{all}"),
        ];
        // What is being worked on needs some room of its own, for which the line may be shorter, but not without what is left.
        let work = if self.working.is_empty() { 0 } else { WORK + 3 };
        let roomy = forms[..3].iter().find(|form| wide(form).saturating_add(work) <= room);
        let form = roomy.or_else(|| forms.iter().find(|form| wide(form) <= room)).unwrap_or(&forms[4]);
        let rest = room.saturating_sub(wide(form) + 3);
        if self.working.is_empty() || rest < WORK {
            form.clone()
        } else {
            format!("{form} | {}", fit(self.working, rest))
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn now(then: &[String]) -> Now<'_> {
        Now {
            parcels: (26, 144),
            rate: Some(7.69e7),
            left: Some(23.4),
            then,
            working: "chains size 32, temperature 2.29, random chain 2",
            stopping: false,
        }
    }

    #[test]
    fn the_bottom_line_says_the_most_that_fits() {
        let then = ["means", "tc"].map(String::from);
        let words = |width: usize| now(&then).words(Width::Of(width));
        assert_eq!(
            now(&then).words(Width::Any),
            "26 of 144 parcels, 7.7e7 updates/s, about 23 s left, then means, tc | chains size 32, temperature 2.29, random chain 2"
        );
        assert_eq!(words(79), "26 of 144 parcels, 7.7e7 updates/s, about 23 s left | chains size 32, temperat…");
        assert_eq!(words(60), "26 of 144, 7.7e7/s, 23 s left | chains size 32, temperature…");
        assert_eq!(words(23), "26 of 144, 23 s left");
        assert_eq!(words(19), "26/144");
        for width in 5..200 {
            assert!(wide(&words(width)) <= width.max(6), "{width}: {}", words(width));
        }
    }

    /// Wide characters take two columns each.
    #[test]
    fn wide_characters_are_counted() {
        let state = Now {
            working: "自旋自旋自旋自旋自旋自旋自旋自旋自旋自旋", rate: None, left: None, ..now(&[])
        };
        for width in 20..60 {
            let words = state.words(Width::Of(width));
            assert!(wide(&words) <= width, "{width}: {words}");
        }
    }

    #[test]
    fn what_is_not_known_is_not_said() {
        let state = Now { rate: None, left: None, working: "", ..now(&[]) };
        assert_eq!(state.words(Width::Any), "26 of 144 parcels");
        assert_eq!(Now { stopping: true, ..now(&[]) }.words(Width::Of(20)), "stopping");
    }
}
