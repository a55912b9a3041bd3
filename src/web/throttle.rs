//! Limits on guessing: per account and per address.

use std::net::IpAddr;
use std::num::NonZeroU32;
use std::time::Duration;

use governor::clock::{Clock, DefaultClock};
use governor::{DefaultKeyedRateLimiter, Quota, RateLimiter};

use crate::error::Error;

/// Counts attempts to sign in. An account allows few, an address (behind which the
/// whole brewery may sit) more; neither locks anybody out for longer than a minute.
#[derive(Debug)]
pub struct Throttle {
    accounts: DefaultKeyedRateLimiter<String>,
    addresses: DefaultKeyedRateLimiter<IpAddr>,
}

impl Throttle {
    /// Ten tries at once for an account, then one in six seconds; forty and one a
    /// second for an address.
    pub fn new() -> Option<Self> {
        let accounts =
            Quota::with_period(Duration::from_secs(6))?.allow_burst(NonZeroU32::new(10)?);
        let addresses =
            Quota::with_period(Duration::from_secs(1))?.allow_burst(NonZeroU32::new(40)?);
        Some(Self {
            accounts: RateLimiter::keyed(accounts),
            addresses: RateLimiter::keyed(addresses),
        })
    }

    /// Counts one attempt, or says how long to wait.
    pub fn attempt(&self, account: &str, address: IpAddr) -> Result<(), Error> {
        let wait = |until: governor::NotUntil<<DefaultClock as Clock>::Instant>| Error::TooMany {
            seconds: until
                .wait_time_from(DefaultClock::default().now())
                .as_secs()
                + 1,
        };
        self.addresses.check_key(&address).map_err(wait)?;
        self.accounts
            .check_key(&account.trim().to_lowercase())
            .map_err(wait)?;
        self.accounts.retain_recent();
        self.addresses.retain_recent();
        Ok(())
    }
}
