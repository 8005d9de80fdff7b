//! From a sample and a ledger to a state: names become indices and come back.
