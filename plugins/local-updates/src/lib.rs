//! standard local-updates of spinledger
