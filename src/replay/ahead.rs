//! Decoding and inspecting ahead on several threads, handed over in the order of the recording.
//!
//! Frames are independent of each other until their parts are merged, so which thread looked at a frame can't be told
//! from the result. Frame `k` belongs to worker `k % workers`, and the consumer asks the workers in turn; a full queue
//! makes a worker wait, so memory stays bounded however long the recording is.

use std::sync::mpsc::{Receiver, SyncSender, sync_channel};
use std::thread::Scope;

use super::drive::Looks;
use crate::clock::Monotonic;
use crate::frames::Frame;
use crate::health::Durations;
use crate::inspect::{Inspector, Look};
use crate::units::Micros;

/// Looks that wait in each worker's queue.
const QUEUE: usize = 4;

/// Looks of a recording, inspected ahead.
pub struct Ahead<E> {
    lanes: Vec<Lane<E>>,
    next: usize,
    took: Durations,
}

struct Lane<E> {
    looks: Receiver<Result<Timed, E>>,
    used: SyncSender<Look>,
}

/// A look and how long the inspector took for it.
struct Timed {
    look: Look,
    took: Micros,
}

impl<E: Send> Ahead<E> {
    /// Spawns one worker in `scope` for each of `inspectors`; frame `k` of `frames` is read by `read(k, ...)`.
    pub fn spawn<'scope>(
        scope: &'scope Scope<'scope, '_>,
        inspectors: Vec<Inspector>,
        frames: usize,
        read: impl Fn(usize, &mut Frame) -> Result<(), E> + Copy + Send + 'scope,
    ) -> Self
    where
        E: 'scope,
    {
        let workers = inspectors.len();
        let lane = |(worker, inspector)| {
            let (send, looks) = sync_channel(QUEUE);
            let (used, spare) = sync_channel(QUEUE + 2);
            let mine = (worker..frames).step_by(workers);
            scope.spawn(move || work(inspector, mine, read, &send, &spare));
            Lane { looks, used }
        };
        Self {
            lanes: inspectors.into_iter().enumerate().map(lane).collect(),
            next: 0,
            took: Durations::default(),
        }
    }
}

impl<E> Ahead<E> {
    /// How long the inspectors took for the frames that were handed over so far, decoding left out.
    pub fn took(&self) -> &Durations {
        &self.took
    }
}

fn work<E>(
    mut inspector: Inspector,
    frames: impl Iterator<Item = usize>,
    read: impl Fn(usize, &mut Frame) -> Result<(), E>,
    send: &SyncSender<Result<Timed, E>>,
    spare: &Receiver<Look>,
) {
    let clock = Monotonic::reading(Micros::ZERO);
    let mut frame = Frame::default();
    for k in frames {
        let look = read(k, &mut frame).map(|()| {
            let mut look = spare.try_recv().unwrap_or_default();
            let begun = clock.now();
            inspector.inspect(&frame, &mut look);
            let took = clock.now() - begun;
            Timed { look, took }
        });
        let failed = look.is_err();
        // The consumer is gone: it has seen an error or was told to stop.
        if send.send(look).is_err() || failed {
            return;
        }
    }
}

impl<E> Looks for Ahead<E> {
    type Error = E;

    fn next_into(&mut self, look: &mut Look) -> Result<bool, E> {
        let count = self.lanes.len();
        let lane = &self.lanes[self.next % count];
        self.next += 1;
        match lane.looks.recv() {
            Ok(next) => {
                let next = next?;
                self.took.add(next.took);
                let used = std::mem::replace(look, next.look);
                // A full return queue only means that this buffer is not needed again.
                let _ = lane.used.try_send(used);
                Ok(true)
            }
            Err(_) => Ok(false),
        }
    }
}
