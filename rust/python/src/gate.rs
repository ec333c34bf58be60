//! The gate through which every core call passes: it releases the interpreter,
//! polls for Ctrl-C, reports progress and translates errors.

use std::sync::{Mutex, mpsc};
use std::time::Duration;

use pyo3::exceptions::{PyKeyboardInterrupt, PyRuntimeError, PyValueError};
use pyo3::prelude::*;
use rayloom_core::error::CoreError;
use rayloom_core::monitor::Monitor;

/// How often a long call looks for Ctrl-C and reports its progress.
const POLL: Duration = Duration::from_millis(100);

/// A Python callable `(done, total)`.
pub type Progress = Option<Py<PyAny>>;

/// Runs a short computation without the interpreter lock.
pub fn run_short<T: Send>(
    py: Python<'_>,
    work: impl FnOnce() -> Result<T, CoreError> + Send,
) -> PyResult<T> {
    py.detach(work).map_err(|error| translate(&error))
}

/// Runs a long computation on `threads` threads (all cores if `None`), with
/// progress reports and cancellation.
pub fn run_long<T: Send>(
    py: Python<'_>,
    threads: Option<usize>,
    progress: &Progress,
    work: impl FnOnce(&Monitor) -> Result<T, CoreError> + Send,
) -> PyResult<T> {
    let pool = rayon_pool(threads)?;
    let monitor = Monitor::default();
    let (sender, receiver) = mpsc::channel::<()>();
    let receiver = Mutex::new(receiver);
    std::thread::scope(|scope| {
        let (pool, monitor) = (&pool, &monitor);
        let handle = scope.spawn(move || {
            // Dropped at the end of the work, even after a panic: this wakes the watcher.
            let _finished = sender;
            pool.install(|| work(monitor))
        });
        let interrupted = watch(py, monitor, progress, &receiver);
        let outcome = py.detach(|| handle.join());
        interrupted?;
        match outcome {
            Ok(result) => result.map_err(|error| translate(&error)),
            Err(_) => Err(PyRuntimeError::new_err(
                "the numerical core stopped unexpectedly; please report this with your inputs",
            )),
        }
    })
}

fn watch(
    py: Python<'_>,
    monitor: &Monitor,
    progress: &Progress,
    finished: &Mutex<mpsc::Receiver<()>>,
) -> PyResult<()> {
    let mut reported = None;
    loop {
        let waiting = py.detach(|| wait(finished));
        let poll = py.check_signals().and_then(|()| {
            let state = monitor.progress();
            if let (Some(callable), true) = (progress, reported != Some(state) && state.1 > 0) {
                reported = Some(state);
                callable.call1(py, state)?;
            }
            Ok(())
        });
        if let Err(error) = poll {
            monitor.cancel();
            return Err(error);
        }
        if !waiting {
            return Ok(());
        }
    }
}

/// True while the work goes on.
fn wait(finished: &Mutex<mpsc::Receiver<()>>) -> bool {
    finished
        .lock()
        .is_ok_and(|receiver| receiver.recv_timeout(POLL) == Err(mpsc::RecvTimeoutError::Timeout))
}

/// A pool of `threads` threads, or of one per core.
pub fn rayon_pool(threads: Option<usize>) -> PyResult<rayon::ThreadPool> {
    if threads == Some(0) {
        return Err(PyValueError::new_err("threads: expected at least 1, got 0"));
    }
    rayon::ThreadPoolBuilder::new()
        .num_threads(threads.unwrap_or(0))
        .build()
        .map_err(|error| PyRuntimeError::new_err(format!("cannot start threads: {error}")))
}

fn translate(error: &CoreError) -> PyErr {
    match error {
        CoreError::Invalid { .. } => PyValueError::new_err(error.to_string()),
        CoreError::Interrupted => PyKeyboardInterrupt::new_err("interrupted"),
    }
}
