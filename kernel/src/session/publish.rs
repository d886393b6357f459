//! Ways out: how the loop's replies and broadcasts are dressed and handed over.
//!
//! Every message names its parent, the request that caused it, since that is how clients know
//! which cell an output belongs to. Broadcasts carry a topic in place of a client's identity.

use jupyter_protocol::{JupyterMessage, JupyterMessageContent};

use crate::wire::{Inlet, Outlets};

/// The name that stands in the kernel's own headers.
const USERNAME: &str = "kernel";

/// Takes finished messages: the sockets, or a recorder in the session's tests.
pub trait Outlet {
    /// Sends a reply by the socket its request came in by.
    async fn reply(&mut self, inlet: Inlet, message: JupyterMessage);

    /// Broadcasts to every client.
    async fn publish(&mut self, message: JupyterMessage);
}

impl Outlet for Outlets {
    async fn reply(&mut self, inlet: Inlet, message: JupyterMessage) {
        Outlets::reply(self, inlet, message).await;
    }

    async fn publish(&mut self, message: JupyterMessage) {
        Outlets::publish(self, message).await;
    }
}

/// A reply to a request, addressed to its sender.
pub fn reply_to(
    parent: &JupyterMessage,
    content: impl Into<JupyterMessageContent>,
) -> JupyterMessage {
    let mut message = JupyterMessage::new(content, Some(parent));
    message.header.username = USERNAME.to_owned();
    message
}

/// A broadcast about a request, or about the kernel itself.
pub fn broadcast(
    kernel: &str,
    parent: Option<&JupyterMessage>,
    content: impl Into<JupyterMessageContent>,
) -> JupyterMessage {
    let mut message = JupyterMessage::new(content, parent);
    message.header.username = USERNAME.to_owned();
    let topic = format!("kernel.{kernel}.{}", message.header.msg_type);
    message.zmq_identities = vec![topic.into()];
    message
}

#[cfg(test)]
mod tests {
    use super::*;
    use jupyter_protocol::{InterruptReply, KernelInfoRequest, Status};

    #[test]
    fn a_reply_goes_back_the_way_its_request_came_and_a_broadcast_has_a_topic() {
        let mut parent: JupyterMessage = KernelInfoRequest {}.into();
        parent.zmq_identities = vec!["client".into()];
        let reply = reply_to(&parent, InterruptReply::new());
        assert_eq!(reply.zmq_identities, parent.zmq_identities);
        assert_eq!(reply.parent_header.unwrap().msg_id, parent.header.msg_id);
        let busy = broadcast("k", Some(&parent), Status::busy());
        assert_eq!(busy.zmq_identities, ["kernel.k.status"]);
        assert_eq!(busy.parent_header.unwrap().msg_id, parent.header.msg_id);
        assert!(broadcast("k", None, Status::starting()).parent_header.is_none());
    }
}
