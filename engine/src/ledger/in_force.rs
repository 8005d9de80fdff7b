//! Ledgers that stand in for the shipped ones while a sealed script is run again, and which shipped ledgers were asked
//! for.
//!
//! Both belong to the process, like the shipped constants themselves: every room asks [`super::shipped::ledger`], and a
//! script that is run again with the constants of another day must meet them everywhere.

use std::collections::{BTreeMap, BTreeSet};
use std::sync::{Mutex, MutexGuard, PoisonError};

use super::Ledger;

#[derive(Default)]
struct InForce {
    stand_ins: BTreeMap<String, Ledger>,
    asked: BTreeSet<String>,
}

static IN_FORCE: Mutex<Option<InForce>> = Mutex::new(None);

fn in_force() -> MutexGuard<'static, Option<InForce>> {
    IN_FORCE.lock().unwrap_or_else(PoisonError::into_inner)
}

/// Keeps ledgers standing in for the shipped ones of the same names, until it is dropped.
#[must_use = "the shipped ledgers are back when it is dropped"]
pub struct StandIns(());

/// Puts these ledgers in the place of the shipped ones of the same names, and begins to note which are asked for.
pub fn stand_in(ledgers: impl IntoIterator<Item = Ledger>) -> StandIns {
    let stand_ins = ledgers.into_iter().map(|ledger| (ledger.name().to_owned(), ledger)).collect();
    *in_force() = Some(InForce { stand_ins, asked: BTreeSet::new() });
    StandIns(())
}

impl StandIns {
    /// Names of the shipped ledgers that were asked for since.
    #[must_use]
    pub fn asked(&self) -> BTreeSet<String> {
        in_force().as_ref().map(|kept| kept.asked.clone()).unwrap_or_default()
    }
}

impl Drop for StandIns {
    fn drop(&mut self) {
        *in_force() = None;
    }
}

/// The ledger standing in for a shipped one; notes that it was asked for.
pub(super) fn instead_of(name: &str) -> Option<Ledger> {
    let mut kept = in_force();
    let kept = kept.as_mut()?;
    kept.asked.insert(name.to_owned());
    kept.stand_ins.get(name).cloned()
}
