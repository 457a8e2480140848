//! The thread that scans. It takes one job after the other; what it does cannot be interrupted and need not be, because
//! nothing waits for it: the program may end in the middle of a scan.

use std::panic::{AssertUnwindSafe, catch_unwind};
use std::path::{Path, PathBuf};
use std::sync::Arc;

use crossbeam_channel::{Receiver, Sender, unbounded};
use lsp_server::RequestId;
use serde_json::Value;

use super::Prepare;
use crate::cure::{Change, Cure};
use crate::source::PathError;
use crate::{Request, Scan};

pub(super) enum Job {
    Scan,
    /// The cure of a finding, for the request that resolves this code action.
    Cure {
        id: RequestId,
        action: Value,
        fingerprint: String,
    },
}

pub(super) enum Done {
    Scan(Result<Box<Scan>, PathError>),
    /// The change, or why there is none.
    Cure {
        id: RequestId,
        action: Value,
        result: Result<Box<Change>, String>,
    },
}

/// Starts the thread; it ends when nobody asks any more.
pub(super) fn start(
    root: PathBuf,
    environment: fn(&str) -> Option<String>,
    prepare: Arc<Prepare>,
) -> (Sender<Job>, Receiver<Done>) {
    let (jobs, todo) = unbounded::<Job>();
    let (report, done) = unbounded();
    std::thread::spawn(move || {
        for job in todo {
            let done = match job {
                Job::Scan => Done::Scan(guarded(&root, &*prepare, |request| {
                    crate::scan(request, &environment, &|_| {}).map(Box::new)
                })),
                Job::Cure { id, action, fingerprint } => {
                    let result = guarded(&root, &*prepare, |request| cure(request, &fingerprint, &root, environment));
                    Done::Cure {
                        id,
                        action,
                        result: result.map_err(|error| error.to_string()).and_then(|result| result),
                    }
                }
            };
            if report.send(done).is_err() {
                return;
            }
        }
    });
    (jobs, done)
}

/// A panic is a defect of ours; it must not leave the editor without an answer for ever.
fn guarded<T>(
    root: &Path,
    prepare: &Prepare,
    work: impl FnOnce(&Request) -> Result<T, PathError>,
) -> Result<T, PathError> {
    catch_unwind(AssertUnwindSafe(|| work(&prepare(root)?))).unwrap_or_else(|_| {
        Err(PathError::new("the analysis broke off", "this is a defect of ours; please report it with the sources"))
    })
}

fn cure(
    request: &Request,
    fingerprint: &str,
    root: &Path,
    environment: fn(&str) -> Option<String>,
) -> Result<Result<Box<Change>, String>, PathError> {
    let cure = crate::cure(request, fingerprint, root, &environment, &|_| {})?;
    Ok(match cure {
        Cure::Patch { change, .. } => Ok(change),
        Cure::Terms { text } => Err(text),
        Cure::Withheld { reason } => Err(format!("no cure is offered: {reason}")),
    })
}
