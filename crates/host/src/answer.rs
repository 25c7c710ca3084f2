//! Status and message of a call, as an error or none.

use crate::error::{HostError, Result};
use crate::item::Label;
use spinledger_abi::{SL_CANCELLED, SL_FAILED, SL_OK, SL_PANICKED, SlMessage};

/// Room for a message; what is longer is cut by the plugin.
const ROOM: usize = 1024;

/// Makes a call that may fail.
pub(crate) fn ask(label: &Label, doing: &'static str, call: impl FnOnce(*mut SlMessage) -> i32) -> Result<()> {
    let mut buffer = [0u8; ROOM];
    let mut message = SlMessage { data: buffer.as_mut_ptr(), capacity: ROOM, length: 0 };
    let status = call(&mut message);
    if status == SL_OK {
        return Ok(());
    }
    let text = String::from_utf8_lossy(&buffer[..message.length.min(ROOM)]).into_owned();
    let message = if text.is_empty() { "(it does not say why)".to_owned() } else { text };
    let label = label.clone();
    Err(match status {
        SL_FAILED => HostError::Failed { label, doing, message },
        SL_PANICKED => HostError::Panicked { label, doing, message },
        SL_CANCELLED => HostError::Cancelled { label, doing },
        other => {
            let what = format!("asked to {doing}, it returns status {other}, which does not exist");
            HostError::Wrong { label, what }
        }
    })
}
