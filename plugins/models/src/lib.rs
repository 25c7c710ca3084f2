//! standard models of spinledger
