//! exact results for lattice spin systems
