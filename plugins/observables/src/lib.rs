//! standard observables of spinledger
