//! standard lattices of spinledger
