//! turns due parcels into ledger entries
