//! Cells that wait, and the one that runs.

use std::collections::VecDeque;

use chrono::{DateTime, Utc};
use jupyter_protocol::{ExecuteRequest, JupyterMessage};

use super::engine::Job;
use crate::cells::types::{CellRequest, Origin};
use crate::log::store::Listener;
use crate::wire::Inlet;

/// A cell that a client asked to run.
#[derive(Debug)]
pub struct Order {
    /// Where it came from.
    pub inlet: Inlet,
    /// The request as it came, the parent of everything the cell causes.
    pub message: JupyterMessage,
    /// Its content.
    pub execute: ExecuteRequest,
}

/// How far the cell at the head of the queue is.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Turn {
    /// The engine is not ready yet.
    Waiting,
    /// The engine was given it, but an interrupt would not reach it yet.
    HandedOver {
        /// Whether it is to be interrupted as soon as that is possible.
        interrupt: bool,
    },
    /// The engine is at it.
    Begun,
}

/// The cell at the head of the queue.
#[derive(Debug)]
pub struct Running {
    /// What was asked.
    pub order: Order,
    /// The number shown as cell `[n]`.
    pub count: usize,
    /// When it got its turn.
    pub since: DateTime<Utc>,
    /// How far it is.
    pub turn: Turn,
    /// The plain text of its result, for the history.
    pub output: Option<String>,
    /// Takes the digests of what it shows, for the log.
    pub listener: Listener,
    /// The line about its long work that clients have been shown.
    pub headway: Headway,
}

/// What became of the line that says how far a cell has come.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Headway {
    /// There was none yet.
    Never,
    /// It says something.
    Shown,
    /// It was emptied; its place is used again.
    Emptied,
}

impl Running {
    /// Whether clients see what it shows.
    pub fn is_heard(&self) -> bool {
        !self.order.execute.silent
    }

    /// Whether somebody waits for it who wants to know how far it has come. A client that can ask
    /// a person for input has one; one that runs notebooks by itself keeps all that is shown.
    pub fn is_watched(&self) -> bool {
        self.is_heard() && self.order.execute.allow_stdin
    }

    /// The name under which the line about its long work is shown and changed.
    pub fn headway_id(&self) -> String {
        format!("semiaxis-headway-{}", self.order.message.header.msg_id)
    }

    /// Whether it is counted and remembered. A silent cell never is, whatever else it asks.
    pub fn is_stored(&self) -> bool {
        self.order.execute.store_history && !self.order.execute.silent
    }

    /// Whether it still waits for the engine to be ready.
    pub fn waits(&self) -> bool {
        self.turn == Turn::Waiting
    }

    /// What the engine is given.
    pub fn job(&self) -> Job {
        let expressions = self.order.execute.user_expressions.iter().flatten();
        let mut expressions: Vec<_> =
            expressions.map(|(name, text)| (name.clone(), text.clone())).collect();
        // The protocol's map has no order; sorting makes a run repeatable.
        expressions.sort();
        Job {
            request: CellRequest {
                code: self.order.execute.code.clone(),
                count: u32::try_from(self.count).unwrap_or(u32::MAX),
                silent: self.order.execute.silent,
                origin: origin(&self.order.message),
            },
            expressions,
        }
    }
}

/// Which cell a request is about, where the client says so beside the protocol: editors send the
/// identifier of the cell, and those of cells that were deleted since.
pub fn origin(message: &JupyterMessage) -> Origin {
    let metadata = &message.metadata;
    let text = |value: &serde_json::Value| value.as_str().map(str::to_owned);
    let deleted = metadata.get("deletedCells").and_then(serde_json::Value::as_array);
    Origin {
        cell_id: metadata.get("cellId").and_then(text).filter(|id| !id.is_empty()),
        deleted: deleted.into_iter().flatten().filter_map(text).collect(),
    }
}

/// The cells of one session.
#[derive(Debug, Default)]
pub struct Queue {
    /// Those that have not had their turn.
    waiting: VecDeque<Order>,
    /// The one that has.
    pub running: Option<Running>,
    /// How many stored cells have had their turn.
    counted: usize,
}

impl Queue {
    /// Adds a cell at the end.
    pub fn push(&mut self, order: Order) {
        self.waiting.push_back(order);
    }

    /// Gives the next cell its turn and its number, if none is running.
    ///
    /// A cell that is not stored shows the number the next stored one will get.
    pub fn advance(&mut self) -> Option<&Running> {
        if self.running.is_some() {
            return None;
        }
        let order = self.waiting.pop_front()?;
        let running = Running {
            order,
            count: self.counted + 1,
            since: Utc::now(),
            turn: Turn::Waiting,
            output: None,
            listener: Listener::default(),
            headway: Headway::Never,
        };
        if running.is_stored() {
            self.counted += 1;
        }
        Some(self.running.insert(running))
    }

    /// Takes everything that waits.
    pub fn drain(&mut self) -> VecDeque<Order> {
        std::mem::take(&mut self.waiting)
    }

    /// The number that an aborted or malformed request reports.
    pub fn counted(&self) -> usize {
        self.counted
    }
}
