//! The pool against programs that are workers in name only: shell scripts that speak over their standard input, as workers do.

use super::*;
use crate::job::CloseJob;
use spinledger_terms::Value;
use std::os::unix::fs::PermissionsExt;

const DONE: &str = r#"echo '{"done":{"computed":true,"updates":5,"entries":[]}}' >&0"#;

struct Desk {
    folder: tempfile::TempDir,
}

impl Desk {
    fn new() -> Self {
        Desk { folder: tempfile::tempdir().unwrap() }
    }

    /// What happens to some jobs with workers that run this script.
    fn execute(&self, script: &str, jobs: usize, workers: usize, stall: Option<f64>) -> (Vec<String>, Option<String>) {
        self.execute_with(script, jobs, workers, stall, Arc::default())
    }

    fn execute_with(
        &self,
        script: &str,
        jobs: usize,
        workers: usize,
        stall: Option<f64>,
        stop: Arc<AtomicBool>,
    ) -> (Vec<String>, Option<String>) {
        let program = self.folder.path().join("program");
        std::fs::write(&program, format!("#!/bin/sh\n{script}\n")).unwrap();
        std::fs::set_permissions(&program, std::fs::Permissions::from_mode(0o755)).unwrap();
        let options = PoolOptions {
            program,
            ledger: self.folder.path().to_owned(),
            workers,
            threads: 1,
            stall: stall.map(Duration::from_secs_f64),
            stop,
        };
        let job = Job::Close(CloseJob {
            preimage: String::new(),
            publish: false,
            pieces: Vec::new(),
            starts: Vec::new(),
            layout: None,
            parameters: Value::Null,
            pipeline: None,
        });
        let mut events = Vec::new();
        let mut record = |job, event| {
            let words = match event {
                Event::Started => "started".to_owned(),
                Event::Progress { updates } => format!("progress {updates}"),
                Event::Log(text) => format!("log {text}"),
                Event::Done { computed, updates, .. } => format!("done {computed} {updates}"),
                Event::Broken(message) => format!("broken {message}"),
                Event::Stopping => "stopping".to_owned(),
                Event::Stopped { updates, .. } => format!("stopped {updates}"),
            };
            events.push(format!("{job} {words}"));
        };
        let outcome = loop {
            match Pool::new(options.clone()).execute(&vec![job.clone(); jobs], &mut record) {
                // Another test started a process while the script was open for writing.
                Err(PoolError::Start(error)) if error.kind() == std::io::ErrorKind::ExecutableFileBusy => continue,
                outcome => break outcome,
            }
        };
        (events, outcome.err().map(|e| e.to_string()))
    }
}

#[test]
fn jobs_are_done_in_order_by_one_worker() {
    let script = format!(
        "while read -r job; do echo '\"taken\"' >&0; echo '{{\"progress\":{{\"updates\":3}}}}' >&0; {DONE}; done"
    );
    let (events, error) = Desk::new().execute(&script, 2, 1, None);
    let expected = ["0 started", "0 progress 3", "0 done true 5", "1 started", "1 progress 3", "1 done true 5"];
    assert_eq!(events, expected);
    assert_eq!(error, None);
}

/// The job at which a worker dies is broken, with what it printed last; the next has a new worker.
#[test]
fn a_death_breaks_one_job() {
    let script = format!(
        "read -r job; echo '\"taken\"' >&0; echo last words >&2; mkdir done 2>/dev/null && kill -SEGV $$; {DONE}; read -r job"
    );
    let desk = Desk::new();
    let script = format!("cd {}; {script}", desk.folder.path().display());
    let (events, error) = desk.execute(&script, 2, 1, None);
    let broken = "0 broken its worker was ended by signal 11 (invalid memory access); its last words: last words";
    assert_eq!(events, ["0 started", broken, "1 started", "1 done true 5"]);
    assert_eq!(error, None);
}

/// A worker that ends before it takes its job up breaks nothing: another gets the job.
#[test]
fn a_job_that_was_not_taken_up_is_given_again() {
    let desk = Desk::new();
    let script = format!(
        "cd {}; mkdir once 2>/dev/null && exit 1; read -r job; echo '\"taken\"' >&0; {DONE}; read -r job",
        desk.folder.path().display()
    );
    let (events, error) = desk.execute(&script, 1, 1, None);
    assert_eq!(events, ["0 started", "0 done true 5"]);
    assert_eq!(error, None);
}

/// Workers that cannot even start do not break job after job: that is told, and is the end.
#[test]
fn workers_that_never_start_are_the_end() {
    let (events, error) = Desk::new().execute("echo no such ledger >&2; exit 2", 1000, 2, None);
    assert!(events.iter().all(|event| event.ends_with("started")), "{events:?}");
    let error = error.expect("an error");
    assert!(error.ends_with("status 2; its last words: no such ledger"), "{error}");
}

#[test]
fn a_full_disk_is_the_end_and_breaks_nothing() {
    let script = "read -r job; echo '\"taken\"' >&0; echo '{\"disk\":{\"message\":\"full\"}}' >&0; read -r job";
    let (events, error) = Desk::new().execute(script, 5, 1, None);
    assert_eq!(events, ["0 started"]);
    assert_eq!(error.as_deref(), Some("full"));
}

/// Work held elsewhere is asked for again until it is free; that is told once, after a while, and its start once.
#[test]
fn held_work_is_waited_for() {
    let desk = Desk::new();
    // Each job is held for the first 20 times that it is asked for: 4 s.
    let script = format!(
        "cd {}; while read -r job; do echo '\"taken\"' >&0; echo x >> asked; \
         if [ $(wc -l < asked) -lt 20 ]; then echo '{{\"held\":{{\"by\":\"process 7 on far\"}}}}' >&0; else {DONE}; fi; done",
        desk.folder.path().display()
    );
    let (events, error) = desk.execute(&script, 1, 1, Some(1.0));
    assert_eq!(
        events,
        ["0 started", "0 log waiting for work that another run does (process 7 on far)", "0 done true 5"]
    );
    assert_eq!(error, None);
}

#[test]
fn a_silent_worker_is_ended() {
    let script = "read -r job; echo '\"taken\"' >&0; exec sleep 1000";
    let (events, error) = Desk::new().execute(script, 1, 1, Some(0.3));
    assert_eq!(events, ["0 started", "0 broken no progress for 0.3 s (--stall): its worker was ended"]);
    assert_eq!(error, None);
}

/// A process that the worker left behind holds its descriptors: its end is noticed all the same.
#[test]
fn a_death_is_noticed_behind_an_open_descriptor() {
    let script = "read -r job; echo '\"taken\"' >&0; (sleep 20 <&0) & exit 5";
    let begun = Instant::now();
    let (events, error) = Desk::new().execute(script, 1, 1, None);
    assert_eq!(events, ["0 started", "0 broken its worker ended by itself with status 5"]);
    assert_eq!(error, None);
    assert!(begun.elapsed() < Duration::from_secs(15));
}

/// A worker that says something that is none of the reports has no further use.
#[test]
fn nonsense_breaks_the_job() {
    let script = "read -r job; echo '\"taken\"' >&0; echo nonsense >&0; exec sleep 1000";
    let (events, error) = Desk::new().execute(script, 1, 1, None);
    assert_eq!(events, ["0 started", "0 broken its worker was ended by signal 9 (killed)"]);
    assert_eq!(error, None);
}

/// Output without end or line feed neither blocks a worker nor fills memory.
#[test]
fn endless_output_is_cut() {
    let script = "read -r job; echo '\"taken\"' >&0; head -c 5000000 /dev/zero | tr '\\0' 'a'; exit 1";
    let (events, _) = Desk::new().execute(script, 1, 1, None);
    let wanted = format!("0 broken its worker ended by itself with status 1; its last words: {}", "a".repeat(300));
    assert_eq!(events, ["0 started".to_owned(), wanted]);
}

/// When an end is asked for, workers are told that there is no more, and what they report still counts; what waits is not begun.
#[test]
fn an_end_that_is_asked_for_is_orderly() {
    let desk = Desk::new();
    // A worker that reports when its orders end; `cat` ends with them.
    let script = r#"read order; echo '"taken"' >&0; cat >/dev/null; echo '{"stopped":{"updates":7,"entries":[]}}' >&0"#;
    let (events, error) = desk.execute_with(script, 3, 1, None, Arc::new(AtomicBool::new(true)));
    assert_eq!(events, ["0 stopping"], "nothing was begun yet");
    assert_eq!(error.as_deref(), Some("stopped when asked to"));
    let stop = Arc::new(AtomicBool::new(false));
    let later = stop.clone();
    std::thread::spawn(move || {
        std::thread::sleep(Duration::from_millis(400));
        later.store(true, std::sync::atomic::Ordering::Relaxed);
    });
    let begun = Instant::now();
    let (events, error) = desk.execute_with(script, 3, 1, None, stop);
    assert_eq!(events, ["0 started", "0 stopping", "0 stopped 7"]);
    assert_eq!(error.as_deref(), Some("stopped when asked to"));
    assert!(begun.elapsed() < Duration::from_secs(3), "{:?}", begun.elapsed());
}
