//! An answer that has its connection looked at once more.

use std::pin::Pin;
use std::task::{Context, Poll};

use actix_web::body::{BodySize, BoxBody, MessageBody};
use bytes::Bytes;

/// The body of an answer to a request that came in chunks; it tells its end one turn late.
///
/// Where a handler answers before it has read such a body, the HTTP library discards the rest, but if its
/// buffer is full at that moment, nothing wakes the connection to do so, and a client that sends all before
/// it reads waits for ever.
pub(super) struct OneTurnMore {
    body: BoxBody,
    turned: bool,
}

impl OneTurnMore {
    pub(super) fn new(body: BoxBody) -> Self {
        Self {
            body,
            turned: false,
        }
    }
}

impl MessageBody for OneTurnMore {
    type Error = <BoxBody as MessageBody>::Error;

    fn size(&self) -> BodySize {
        self.body.size()
    }

    fn poll_next(
        mut self: Pin<&mut Self>,
        context: &mut Context<'_>,
    ) -> Poll<Option<Result<Bytes, Self::Error>>> {
        match Pin::new(&mut self.body).poll_next(context) {
            Poll::Ready(None) if !self.turned => {
                self.turned = true;
                context.waker().wake_by_ref();
                Poll::Pending
            }
            answer @ (Poll::Ready(_) | Poll::Pending) => answer,
        }
    }
}
