//! Argon2id hashing on one thread of its own.
//!
//! A hash takes 19 MiB and tens of milliseconds. One thread with a short queue
//! keeps the memory to one hash at a time and the server answering; a full queue
//! is answered with “try again”, never with unbounded waiting.

use std::sync::mpsc::{SyncSender, TrySendError, sync_channel};

use argon2::Argon2;
use argon2::password_hash::phc::PasswordHash;
use argon2::password_hash::{PasswordHasher, PasswordVerifier};
use tokio::sync::oneshot;

use crate::error::Error;

/// How many people may wait for a hash at once.
const QUEUE: usize = 16;

enum Job {
    Hash(String, oneshot::Sender<Result<String, String>>),
    Verify(String, String, oneshot::Sender<bool>),
}

/// Handle to the hashing thread; cheap to clone.
#[derive(Clone, Debug)]
pub struct Passwords {
    queue: SyncSender<Job>,
}

impl Passwords {
    /// Starts the thread. It ends when the last handle is gone.
    pub fn start() -> Result<Self, Error> {
        let (queue, jobs) = sync_channel::<Job>(QUEUE);
        std::thread::Builder::new()
            .name("passwords".into())
            .spawn(move || {
                // Argon2id, 19 MiB, two passes: the library's defaults, which are the
                // first choice of the OWASP password storage guidance (from memory).
                let argon2 = Argon2::default();
                for job in jobs {
                    match job {
                        Job::Hash(password, reply) => {
                            let hash = argon2
                                .hash_password(password.as_bytes())
                                .map(|hash| hash.to_string())
                                .map_err(|error| error.to_string());
                            let _ = reply.send(hash);
                        }
                        Job::Verify(password, hash, reply) => {
                            let matches = PasswordHash::new(&hash).is_ok_and(|hash| {
                                argon2.verify_password(password.as_bytes(), &hash).is_ok()
                            });
                            let _ = reply.send(matches);
                        }
                    }
                }
            })
            .map_err(|error| Error::internal("The password thread did not start", error))?;
        Ok(Self { queue })
    }

    /// The hash of a password, as a PHC string.
    pub async fn hash(&self, password: &str) -> Result<String, Error> {
        let (reply, answer) = oneshot::channel();
        self.send(Job::Hash(password.to_owned(), reply))?;
        answer
            .await
            .map_err(|error| Error::internal("The password could not be hashed", error))?
            .map_err(|error| Error::internal("The password could not be hashed", error))
    }

    /// Whether a password fits a hash.
    pub async fn verify(&self, password: &str, hash: &str) -> Result<bool, Error> {
        let (reply, answer) = oneshot::channel();
        self.send(Job::Verify(password.to_owned(), hash.to_owned(), reply))?;
        answer
            .await
            .map_err(|error| Error::internal("The password could not be checked", error))
    }

    fn send(&self, job: Job) -> Result<(), Error> {
        self.queue.try_send(job).map_err(|error| match error {
            TrySendError::Full(_) => Error::TooMany { seconds: 2 },
            TrySendError::Disconnected(_) => {
                Error::internal("The password thread has ended", "channel closed")
            }
        })
    }
}
