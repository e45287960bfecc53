//! Writes the journal on a thread of its own: the screen never waits for the disk.

use super::journal::{Record, Writer};
use std::io;
use std::sync::mpsc::{Receiver, Sender, channel};

/// What the scribe says.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Written {
    /// Everything up to that count of records is safe.
    Safe(u64),
    /// Nothing since the last word is safe; why.
    Failed(String),
}

enum Task {
    Add(Record),
    /// Answers when everything before it has been tried.
    Wait(Sender<io::Result<()>>),
}

/// The writing end for the desk's owner.
pub struct Scribe {
    tasks: Sender<Task>,
}

impl Scribe {
    /// Starts the thread; `tell` is called on it. Records are counted from `from`.
    pub fn start(writer: Writer, from: u64, tell: impl Fn(Written) + Send + 'static) -> Scribe {
        let (tasks, waiting) = channel();
        std::thread::spawn(move || work(writer, from, &waiting, &tell));
        Scribe { tasks }
    }

    /// Has a record written.
    pub fn add(&self, record: Record) {
        // The thread only ends with the program.
        let _ = self.tasks.send(Task::Add(record));
    }

    /// Waits until everything given so far is on the disk.
    ///
    /// # Errors
    /// What went wrong last, if something did.
    pub fn wait(&self) -> io::Result<()> {
        let (answer, answered) = channel();
        let _ = self.tasks.send(Task::Wait(answer));
        answered
            .recv()
            .unwrap_or_else(|_| Err(io::Error::other("the journal's thread is gone")))
    }
}

fn work(mut writer: Writer, mut count: u64, waiting: &Receiver<Task>, tell: &dyn Fn(Written)) {
    while let Ok(task) = waiting.recv() {
        match task {
            Task::Add(record) => {
                count += 1;
                tell(match writer.add(&record) {
                    Ok(()) => Written::Safe(count),
                    Err(error) => Written::Failed(error.to_string()),
                });
            }
            Task::Wait(answer) => {
                let _ = answer.send(writer.flush());
            }
        }
    }
}
