//! standard cluster-updates of spinledger
