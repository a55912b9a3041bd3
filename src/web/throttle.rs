//! Limits on guessing, so drawn that nobody is locked out by somebody else's guesses.

use std::hash::Hash;
use std::net::IpAddr;
use std::num::NonZeroU32;
use std::time::Duration;

use governor::clock::{Clock, DefaultClock};
use governor::{DefaultKeyedRateLimiter, Quota, RateLimiter};

use crate::error::Error;
use crate::id::{MemberId, TabletId};

/// Counts attempts. One account allows few from one address, and the same person at another
/// address has attempts of their own; an address (behind which the whole brewery may sit)
/// allows more. A PIN is shorter and allows fewer: one person's at one tablet, so that
/// guesses at one name stop no other. What is refused by the narrower limit is not counted
/// by the wider one.
#[derive(Debug)]
pub struct Throttle {
    accounts: DefaultKeyedRateLimiter<(String, IpAddr)>,
    addresses: DefaultKeyedRateLimiter<IpAddr>,
    pins: DefaultKeyedRateLimiter<(MemberId, TabletId)>,
    pin_addresses: DefaultKeyedRateLimiter<IpAddr>,
}

impl Throttle {
    /// Of a password, ten tries at once for an account, then one in six seconds; forty and
    /// one a second for an address. Of a PIN, five at once, then one a minute: half of all
    /// PINs of six digits take most of a year.
    pub fn new() -> Option<Self> {
        let quota = |seconds, burst| {
            let period = Quota::with_period(Duration::from_secs(seconds))?;
            Some(period.allow_burst(NonZeroU32::new(burst)?))
        };
        Some(Self {
            accounts: RateLimiter::keyed(quota(6, 10)?),
            addresses: RateLimiter::keyed(quota(1, 40)?),
            pins: RateLimiter::keyed(quota(60, 5)?),
            pin_addresses: RateLimiter::keyed(quota(1, 40)?),
        })
    }

    /// Counts one attempt at a password, or says how long to wait.
    pub fn password(&self, account: &str, address: IpAddr) -> Result<(), Error> {
        let address = network(address);
        count(&self.accounts, (account.trim().to_lowercase(), address))?;
        count(&self.addresses, address)
    }

    /// Counts one attempt at a PIN, or says how long to wait.
    pub fn pin(&self, who: MemberId, tablet: TabletId, address: IpAddr) -> Result<(), Error> {
        count(&self.pins, (who, tablet))?;
        count(&self.pin_addresses, network(address))
    }
}

fn count<K: Clone + Eq + Hash>(limits: &DefaultKeyedRateLimiter<K>, key: K) -> Result<(), Error> {
    limits.retain_recent();
    limits.check_key(&key).map_err(|until| Error::TooMany {
        seconds: until
            .wait_time_from(DefaultClock::default().now())
            .as_secs()
            + 1,
    })
}

/// The address that is counted: of IPv6 the first 64 bits, since a household or a machine
/// may take any of the rest.
fn network(address: IpAddr) -> IpAddr {
    match address.to_canonical() {
        IpAddr::V6(six) => IpAddr::V6((u128::from(six) >> 64 << 64).into()),
        four @ IpAddr::V4(_) => four,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const HERE: IpAddr = IpAddr::V4(std::net::Ipv4Addr::new(10, 0, 0, 1));
    const THERE: IpAddr = IpAddr::V4(std::net::Ipv4Addr::new(10, 0, 0, 2));

    fn tries(attempt: impl Fn() -> Result<(), Error>) -> usize {
        (0..200).take_while(|_| attempt().is_ok()).count()
    }

    #[test]
    fn guesses_at_one_account_stop_neither_its_owner_elsewhere_nor_others_here() {
        let throttle = Throttle::new().unwrap();
        assert_eq!(tries(|| throttle.password("bo", HERE)), 10);
        assert!(throttle.password(" BO ", HERE).is_err());
        throttle.password("bo", THERE).unwrap();
        throttle.password("quin", HERE).unwrap();
        // Refused guesses do not eat what the address allows.
        for _ in 0..100 {
            throttle.password("bo", HERE).unwrap_err();
        }
        throttle.password("mara", HERE).unwrap();
    }

    #[test]
    fn guesses_at_many_accounts_end_with_what_the_address_allows() {
        let throttle = Throttle::new().unwrap();
        let number = std::cell::Cell::new(0);
        let each_another = || {
            number.set(number.get() + 1);
            throttle.password(&number.get().to_string(), HERE)
        };
        assert_eq!(tries(each_another), 40);
        throttle.password("bo", THERE).unwrap();
    }

    #[test]
    fn guesses_at_a_pin_stop_no_other_name_no_other_tablet_and_no_password() {
        let throttle = Throttle::new().unwrap();
        let (bo, quin) = (MemberId::new(), MemberId::new());
        let (tun, mill) = (TabletId::new(), TabletId::new());
        assert_eq!(tries(|| throttle.pin(bo, tun, HERE)), 5);
        throttle.pin(quin, tun, HERE).unwrap();
        throttle.pin(bo, mill, HERE).unwrap();
        throttle.password("bo", HERE).unwrap();
    }

    #[test]
    fn an_address_of_ipv6_is_counted_with_its_neighbours() {
        let throttle = Throttle::new().unwrap();
        let near: IpAddr = "2001:db8::1".parse().unwrap();
        let nearer: IpAddr = "2001:db8::2".parse().unwrap();
        assert_eq!(tries(|| throttle.password("bo", near)), 10);
        assert!(throttle.password("bo", nearer).is_err());
        throttle
            .password("bo", "2001:db8:0:1::1".parse().unwrap())
            .unwrap();
    }
}
