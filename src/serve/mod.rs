//! The language server: LSP (version 3.17) over whatever [`Connection`] it is given. It answers from the last scan of the saved
//! files; a scan runs beside it, so that no question and no shutdown waits for one. What is not saved is not analysed:
//! a file whose text in the editor is not the scanned one gets no edits, and its hover says so.
//!
//! Invariants: a request gets exactly one answer, an error of the protocol if it is a bad one; a scan that fails is said and
//! leaves the findings of the last good one, because taking them away would look like "clean".

mod actions;
mod documents;
mod findings;
mod hover;
mod protocol;
mod worker;

use std::collections::{BTreeMap, BTreeSet};
use std::path::{Path, PathBuf};
use std::sync::Arc;

use crossbeam_channel::{Receiver, Sender, select};
use lsp_server::{Connection, ErrorCode, Message, Notification, Request, RequestId, Response, ResponseError};
use serde::de::DeserializeOwned;
use serde_json::{Value, json};

use crate::Scan;
use crate::source::PathError;
use documents::Documents;
use protocol::{InitializeParams, Severity, TextDocumentParams};
use worker::{Done, Job};

/// Makes the request of a scan for a workspace folder, with the settings as they are now.
pub type Prepare = dyn Fn(&Path) -> Result<crate::Request, PathError> + Send + Sync;

/// Serves until the client says `exit` or goes away. `current` is where relative paths begin, `environment` answers the
/// variables of file lists. Returns whether the client
/// ended it in order, by `shutdown` and then `exit`.
pub fn serve(
    connection: &Connection,
    current: &Path,
    environment: fn(&str) -> Option<String>,
    prepare: Arc<Prepare>,
) -> bool {
    let Ok((id, params)) = connection.initialize_start() else { return false };
    let params: InitializeParams = match serde_json::from_value(params) {
        Ok(params) => params,
        Err(error) => {
            let message = format!("these parameters of `initialize` are not understood: {error}");
            let _ = connection.sender.send(Response::new_err(id, ErrorCode::InvalidParams as i32, message).into());
            return false;
        }
    };
    let root = params.root().unwrap_or_else(|| current.to_path_buf());
    let resolves = params.resolves_edits();
    let (jobs, done) = worker::start(root, environment, prepare);
    if connection.initialize_finish(id, capabilities()).is_err() {
        return false;
    }
    let mut server = Server {
        connection,
        current: current.to_path_buf(),
        jobs,
        resolves,
        documents: Documents::default(),
        scan: None,
        published: BTreeSet::new(),
        scanning: Scanning::default(),
        waiting: Vec::new(),
    };
    server.rescan();
    server.run(&done)
}

fn capabilities() -> Value {
    json!({
        "capabilities": {
            "positionEncoding": "utf-16",
            // Whole texts, to compare them with the scanned ones.
            "textDocumentSync": { "openClose": true, "change": 1, "save": { "includeText": false } },
            "hoverProvider": true,
            "codeActionProvider": { "codeActionKinds": ["quickfix"], "resolveProvider": true },
        },
        "serverInfo": { "name": "stillwire", "version": env!("CARGO_PKG_VERSION") },
    })
}

/// At most one scan runs; any number of reasons for another make one.
#[derive(Default)]
struct Scanning {
    runs: bool,
    again: bool,
}

struct Server<'a> {
    connection: &'a Connection,
    current: PathBuf,
    jobs: Sender<Job>,
    /// Whether the client asks for the edits of a code action when it is chosen.
    resolves: bool,
    documents: Documents,
    /// The last good one.
    scan: Option<Scan>,
    /// Files that the client has diagnostics of.
    published: BTreeSet<String>,
    scanning: Scanning,
    /// Requests whose answer is being worked out.
    waiting: Vec<RequestId>,
}

type Answer = Result<Value, ResponseError>;

impl Server<'_> {
    fn run(&mut self, done: &Receiver<Done>) -> bool {
        loop {
            select! {
                recv(self.connection.receiver) -> message => match message {
                    Ok(Message::Request(request)) if request.method == "shutdown" => return self.shut_down(request),
                    Ok(Message::Request(request)) => self.request(request),
                    Ok(Message::Notification(notification)) if notification.method == "exit" => return false,
                    Ok(Message::Notification(notification)) => self.notification(notification),
                    Ok(Message::Response(_)) => {}
                    Err(_) => return false,
                },
                recv(done) -> result => match result {
                    Ok(result) => self.done(result),
                    Err(_) => return false,
                },
            }
        }
    }

    /// Until `exit` everything else is refused.
    fn shut_down(&self, request: Request) -> bool {
        self.send(Response::new_ok(request.id, Value::Null));
        for id in &self.waiting {
            self.send(refused(id.clone(), ErrorCode::ServerCancelled, "the server shuts down"));
        }
        for message in &self.connection.receiver {
            match message {
                Message::Notification(notification) if notification.method == "exit" => return true,
                Message::Request(request) => {
                    self.send(refused(request.id, ErrorCode::InvalidRequest, "the server is shut down"));
                }
                _ => {}
            }
        }
        false
    }

    fn request(&mut self, request: Request) {
        let Request { id, method, params } = request;
        let answer = match method.as_str() {
            "textDocument/hover" => parsed(params).and_then(|params| self.hover(&params)),
            "textDocument/codeAction" => parsed(params).map(|params| self.actions(&params)),
            "codeAction/resolve" => match self.resolve(&id, params) {
                // The worker answers.
                Ok(()) => return,
                Err(error) => Err(error),
            },
            "initialize" => Err(error(ErrorCode::InvalidRequest, "the server is initialized already")),
            _ => Err(error(ErrorCode::MethodNotFound, &format!("`{method}` is not offered by this server"))),
        };
        self.answer(id, answer);
    }

    fn notification(&mut self, notification: Notification) {
        let Notification { method, params } = notification;
        match method.as_str() {
            "textDocument/didOpen" | "textDocument/didChange" => {
                let Ok(params) = serde_json::from_value::<TextDocumentParams>(params) else { return };
                let Some(path) = protocol::path(&params.text_document.uri) else { return };
                let opened = params.text_document.text.clone();
                let changed = params.content_changes.into_iter().last().map(|change| change.text);
                if let Some(text) = changed.or(opened) {
                    let was = self.is_unsaved(&path);
                    self.documents.set(&path, text);
                    if self.is_unsaved(&path) && !was && method == "textDocument/didChange" {
                        self.log(
                            Severity::Information,
                            &format!(
                                "{}: unsaved edits are not analysed; save the file to see its findings",
                                path.display()
                            ),
                        );
                    }
                }
                if method == "textDocument/didOpen" {
                    self.rescan();
                }
            }
            "textDocument/didSave" | "workspace/didChangeWatchedFiles" | "workspace/didChangeConfiguration" => {
                self.rescan();
            }
            "textDocument/didClose" => {
                let Ok(params) = serde_json::from_value::<TextDocumentParams>(params) else { return };
                if let Some(path) = protocol::path(&params.text_document.uri) {
                    self.documents.forget(&path);
                }
            }
            "$/cancelRequest" => {
                let Ok(id) = serde_json::from_value::<RequestId>(params["id"].clone()) else { return };
                if self.forget(&id) {
                    self.send(refused(id, ErrorCode::RequestCanceled, "cancelled"));
                }
            }
            _ => {}
        }
    }

    fn rescan(&mut self) {
        if self.scanning.runs {
            self.scanning.again = true;
        } else {
            self.scanning = Scanning { runs: self.jobs.send(Job::Scan).is_ok(), again: false };
        }
    }

    fn done(&mut self, done: Done) {
        match done {
            Done::Scan(result) => {
                self.scanning.runs = false;
                // What is out of date already is not shown.
                if std::mem::take(&mut self.scanning.again) {
                    self.rescan();
                    return;
                }
                match result {
                    Ok(scan) => self.publish(*scan),
                    Err(error) => self.say(Severity::Error, &format!("nothing was analysed: {error}")),
                }
            }
            Done::Cure { id, action, result } => {
                if self.forget(&id) {
                    let answer = result.map_err(|reason| error(ErrorCode::RequestFailed, &reason));
                    let answer = answer.and_then(|change| self.cured(action, &change));
                    self.answer(id, answer);
                }
            }
        }
    }

    fn publish(&mut self, scan: Scan) {
        let by_file: BTreeMap<String, Vec<Value>> = findings::diagnostics(&scan, &self.current);
        let gone: Vec<String> = self.published.iter().filter(|uri| !by_file.contains_key(*uri)).cloned().collect();
        for uri in gone {
            self.notify("textDocument/publishDiagnostics", json!({ "uri": uri, "diagnostics": [] }));
        }
        self.published = by_file.keys().cloned().collect();
        for (uri, diagnostics) in by_file {
            self.notify("textDocument/publishDiagnostics", json!({ "uri": uri, "diagnostics": diagnostics }));
        }
        self.log(Severity::Information, &findings::summary(&scan));
        self.scan = Some(scan);
    }

    /// Whether the request still waits for its answer, which it does no more.
    fn forget(&mut self, id: &RequestId) -> bool {
        let before = self.waiting.len();
        self.waiting.retain(|waiting| waiting != id);
        self.waiting.len() < before
    }

    /// Whether the editor has a text of the file that is not the scanned one.
    fn is_unsaved(&self, path: &Path) -> bool {
        let scanned = self.scan.as_ref().and_then(|scan| findings::text(scan, &self.current, path));
        self.documents.differs(path, scanned)
    }

    fn answer(&self, id: RequestId, answer: Answer) {
        self.send(match answer {
            Ok(value) => Response::new_ok(id, value),
            Err(error) => Response::new_err(id, error.code, error.message),
        });
    }

    /// To be seen at once.
    fn say(&self, severity: Severity, message: &str) {
        self.notify("window/showMessage", json!({ "type": severity as u8, "message": message }));
    }

    fn log(&self, severity: Severity, message: &str) {
        self.notify("window/logMessage", json!({ "type": severity as u8, "message": message }));
    }

    fn notify(&self, method: &str, params: Value) {
        self.send(Notification::new(method.to_string(), params));
    }

    /// A client that is gone is noticed by the loop.
    fn send(&self, message: impl Into<Message>) {
        let _ = self.connection.sender.send(message.into());
    }
}

fn parsed<T: DeserializeOwned>(params: Value) -> Result<T, ResponseError> {
    serde_json::from_value(params)
        .map_err(|problem| error(ErrorCode::InvalidParams, &format!("these parameters are not understood: {problem}")))
}

fn error(code: ErrorCode, message: &str) -> ResponseError {
    ResponseError { code: code as i32, message: message.to_string(), data: None }
}

fn refused(id: RequestId, code: ErrorCode, message: &str) -> Response {
    Response::new_err(id, code as i32, message.to_string())
}
