//! checked pipeline and ledger index to parcels and their states
