//! Parameters in the interface's form.

use spinledger_abi::{
    SL_VALUE_BOOLEAN, SL_VALUE_INTEGER, SL_VALUE_LIST, SL_VALUE_MAP, SL_VALUE_NULL, SL_VALUE_NUMBER, SL_VALUE_TEXT,
    SlText, SlValue,
};
use spinledger_terms::Value;
use std::marker::PhantomData;
use std::ptr::null;

/// A tree of `SlValue`, which borrows its texts from the value that it was made from.
pub(crate) struct Tree<'a> {
    root: SlValue,
    /// Children of all nodes; the vectors' memory stays where it is. Not boxes: one that moves is taken to be the only way to what it holds.
    _nodes: Vec<Vec<SlValue>>,
    _texts: PhantomData<&'a Value>,
}

impl<'a> Tree<'a> {
    pub(crate) fn new(value: &'a Value) -> Self {
        let mut nodes = Vec::new();
        Tree { root: node("", value, &mut nodes), _nodes: nodes, _texts: PhantomData }
    }

    pub(crate) fn root(&self) -> *const SlValue {
        &self.root
    }
}

fn text(text: &str) -> SlText {
    SlText { data: text.as_ptr(), length: text.len() }
}

fn node(key: &str, value: &Value, nodes: &mut Vec<Vec<SlValue>>) -> SlValue {
    let (kind, integer, number) = match value {
        Value::Null => (SL_VALUE_NULL, 0, 0.0),
        Value::Bool(b) => (SL_VALUE_BOOLEAN, i64::from(*b), 0.0),
        Value::Integer(i) => (SL_VALUE_INTEGER, *i, *i as f64),
        Value::Number(x) => (SL_VALUE_NUMBER, 0, *x),
        Value::Text(_) => (SL_VALUE_TEXT, 0, 0.0),
        Value::List(_) => (SL_VALUE_LIST, 0, 0.0),
        Value::Map(_) => (SL_VALUE_MAP, 0, 0.0),
    };
    let children: Vec<SlValue> = match value {
        Value::List(list) => list.iter().map(|item| node("", item, nodes)).collect(),
        Value::Map(map) => map.iter().map(|(key, item)| node(key, item, nodes)).collect(),
        _ => Vec::new(),
    };
    let (items, count) = (if children.is_empty() { null() } else { children.as_ptr() }, children.len());
    if count > 0 {
        nodes.push(children);
    }
    let words = if let Value::Text(words) = value { words.as_str() } else { "" };
    SlValue { kind, reserved: 0, integer, number, text: text(words), key: text(key), items, count }
}
