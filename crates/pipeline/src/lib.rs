//! YAML to a checked pipeline, with every problem located
