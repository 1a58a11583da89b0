//! Orders that were done, so that one told again is answered alike and not done twice.

use crate::event::{Order, OrderAnswer, Problem, Wish};
use serde::{Deserialize, Serialize};
use std::collections::VecDeque;

/// Orders remembered; the oldest of more is forgotten. A broker repeats what was not acknowledged,
/// which are at most some hundred messages, and a person the last one.
const REMEMBERED: usize = 256;

/// The newest orders that were done.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(in crate::fleet) struct OrderBook {
    done: VecDeque<Done>,
}

/// An order that was done.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
struct Done {
    wish: Wish,
    answer: OrderAnswer,
}

/// What the book knows of an order's id.
pub(super) enum Known {
    /// It was done; this is the answer.
    Done(Box<OrderAnswer>),
    /// Another order bore it.
    Taken(Problem),
    /// Nothing.
    New,
}

impl OrderBook {
    /// Looks an order up.
    pub(super) fn look_up(&self, order: &Order) -> Known {
        let Some(done) = self.done.iter().find(|done| done.answer.id == order.id) else {
            return Known::New;
        };
        if done.wish == order.wish {
            return Known::Done(Box::new(OrderAnswer {
                reply_to: order.reply_to.clone(),
                ..done.answer.clone()
            }));
        }
        Known::Taken(Problem {
            field: "id".to_owned(),
            value: order.id.clone(),
            way_out: format!(
                "another order with this id was done at {}; give each order an id of its own",
                done.answer.at
            ),
        })
    }

    /// Takes note of an order that was done.
    pub(super) fn note(&mut self, wish: &Wish, answer: &OrderAnswer) {
        if self.done.len() == REMEMBERED {
            self.done.pop_front();
        }
        self.done.push_back(Done {
            wish: wish.clone(),
            answer: answer.clone(),
        });
    }
}
