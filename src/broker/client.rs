//! The differences between MQTT 5.0 and 3.1.1, and the settings that both are given.
//!
//! Each connection gets a client of its own, so that nothing that belongs to an older connection
//! (queued acknowledgements, packet identifiers, events read before the loss) can reach a newer
//! one. The session itself is the broker's, under our client name.

use super::traffic::{Publish, Will};
use crate::configuration::{Broker, Protocol};
use bytes::Bytes;
use holdtrue_engine::event::ReplyTo;
use rumqttc::v5;
use rumqttc::v5::mqttbytes::v5 as packet5;
use rumqttc::{QoS, TlsConfiguration, Transport};
use std::sync::Arc;
use std::time::Duration;
use tokio_rustls::rustls::ClientConfig;

/// Publishes that the library may have in flight. Ours ([`super::link`]) is lower, so that its
/// queue, which also carries acknowledgements, never stops. Above 20 a broker that lowers the limit
/// meets a fault of the library.
const LIBRARY_IN_FLIGHT: u16 = 16;
/// Room in the library's queue beside one acknowledgement for each message of the receive window:
/// publishes, subscriptions, the goodbye.
const QUEUE_EXTRA: usize = 64;
/// How long a connection may take to be made.
const CONNECT_LIMIT: Duration = Duration::from_secs(10);
/// Largest packet of MQTT 3.1.1 (section 2.2.3). That version can't tell the broker a limit, and a
/// packet above ours would end the connection, be sent again, and so for ever.
const LARGEST_PACKET_311: usize = 268_435_460;

/// The sending half.
pub(super) enum Client {
    V5(v5::AsyncClient),
    V311(rumqttc::AsyncClient),
}

/// The half that must be polled.
pub(super) enum Poller {
    V5(Box<v5::EventLoop>),
    V311(Box<rumqttc::EventLoop>),
}

/// The broker's answer to a publish.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Answer {
    /// It has it.
    Taken,
    /// It can't take it at present, and why.
    NotNow(String),
    /// It will not take it however often it is sent, and why.
    Never(String),
}

/// What polling brings.
#[derive(Debug)]
pub(super) enum Seen {
    /// The broker accepted the connection.
    Connected {
        session_present: bool,
        max_packet: Option<u32>,
    },
    /// A message came; `packet` is 0 when it needs no acknowledgement.
    Message {
        topic: String,
        payload: Bytes,
        retained: bool,
        reply_to: Option<ReplyTo>,
        packet: u16,
    },
    /// The broker acknowledged or refused a publish.
    Answered { packet: u16, answer: Answer },
    /// The broker answered a subscription, one entry for each filter; `Some`: why it refused.
    Subscribed(Vec<Option<String>>),
    /// The oldest unsent publish went out under this identifier.
    Sent { packet: u16 },
    /// Our goodbye went out.
    SaidGoodbye,
    /// Nothing that matters here.
    Nothing,
    /// The connection is over.
    Broken { why: String, taken_over: bool },
}

/// Why something could not be handed over: the library's queue is full.
#[derive(Debug)]
pub(super) struct Full;

/// Makes a client for one connection.
pub(super) fn new(
    broker: &Broker,
    tls: Option<Arc<ClientConfig>>,
    will: Option<Will>,
) -> (Client, Poller) {
    let queue = usize::from(broker.receive_maximum) + QUEUE_EXTRA;
    let transport = tls.map(|config| Transport::tls_with_config(TlsConfiguration::Rustls(config)));
    match broker.protocol {
        Protocol::V5 => {
            let (client, poller) = v5::AsyncClient::new(options5(broker, transport, will), queue);
            (Client::V5(client), Poller::V5(Box::new(poller)))
        }
        Protocol::V311 => {
            let options = options311(broker, transport, will);
            let (client, mut poller) = rumqttc::AsyncClient::new(options, queue);
            let mut network = poller.network_options();
            network.set_connection_timeout(CONNECT_LIMIT.as_secs());
            poller.set_network_options(network);
            (Client::V311(client), Poller::V311(Box::new(poller)))
        }
    }
}

fn options5(broker: &Broker, transport: Option<Transport>, will: Option<Will>) -> v5::MqttOptions {
    let mut options = v5::MqttOptions::new(&broker.client_id, &broker.host, broker.port);
    let expiry = u32::try_from(broker.session_expiry.as_secs()).unwrap_or(u32::MAX);
    options
        .set_clean_start(false)
        .set_session_expiry_interval(Some(expiry))
        .set_receive_maximum(Some(broker.receive_maximum))
        .set_max_packet_size(Some(broker.max_packet))
        .set_manual_acks(true)
        .set_outgoing_inflight_upper_limit(LIBRARY_IN_FLIGHT)
        .set_connection_timeout(CONNECT_LIMIT.as_secs())
        .set_keep_alive(broker.keep_alive);
    if let Some(will) = will {
        options.set_last_will(packet5::LastWill::new(
            will.topic,
            will.payload,
            v5::mqttbytes::QoS::AtLeastOnce,
            true,
            None,
        ));
    }
    if let Some(login) = &broker.login {
        options.set_credentials(&login.username, &login.password);
    }
    if let Some(transport) = transport {
        options.set_transport(transport);
    }
    options
}

fn options311(
    broker: &Broker,
    transport: Option<Transport>,
    will: Option<Will>,
) -> rumqttc::MqttOptions {
    let mut options = rumqttc::MqttOptions::new(&broker.client_id, &broker.host, broker.port);
    options
        // A session that is not to outlive the connection can't be told otherwise in 3.1.1.
        .set_clean_session(broker.session_expiry.is_zero())
        .set_max_packet_size(LARGEST_PACKET_311, LARGEST_PACKET_311)
        .set_manual_acks(true)
        .set_inflight(LIBRARY_IN_FLIGHT)
        .set_keep_alive(broker.keep_alive);
    if let Some(will) = will {
        options.set_last_will(rumqttc::LastWill::new(
            will.topic,
            will.payload,
            QoS::AtLeastOnce,
            true,
        ));
    }
    if let Some(login) = &broker.login {
        options.set_credentials(&login.username, &login.password);
    }
    if let Some(transport) = transport {
        options.set_transport(transport);
    }
    options
}

impl Client {
    /// Acknowledges the message with this packet identifier.
    pub(super) fn acknowledge(&self, packet: u16) -> Result<(), Full> {
        let sent = match self {
            Self::V5(client) => {
                let qos = v5::mqttbytes::QoS::AtLeastOnce;
                let mut publish = packet5::Publish::new("", qos, Bytes::new(), None);
                publish.pkid = packet;
                client.try_ack(&publish).is_ok()
            }
            Self::V311(client) => {
                let mut publish = rumqttc::Publish::new("", QoS::AtLeastOnce, Vec::new());
                publish.pkid = packet;
                client.try_ack(&publish).is_ok()
            }
        };
        if sent { Ok(()) } else { Err(Full) }
    }

    /// Publishes.
    pub(super) fn publish(&self, publish: &Publish<'_>) -> Result<(), Full> {
        let Publish { topic, retain, .. } = *publish;
        let payload = publish.payload.to_vec();
        let sent = match self {
            Self::V5(client) => {
                let properties = packet5::PublishProperties {
                    message_expiry_interval: publish.expiry,
                    response_topic: publish.response_topic.map(str::to_owned),
                    correlation_data: publish.correlation.map(Bytes::copy_from_slice),
                    ..packet5::PublishProperties::default()
                };
                let qos = v5::mqttbytes::QoS::AtLeastOnce;
                client
                    .try_publish_with_properties(topic, qos, retain, payload, properties)
                    .is_ok()
            }
            Self::V311(client) => client
                .try_publish(topic, QoS::AtLeastOnce, retain, payload)
                .is_ok(),
        };
        if sent { Ok(()) } else { Err(Full) }
    }

    /// Subscribes to all filters with quality of service 1, in one packet. Of `as_published`,
    /// messages keep the retain flag that their sender gave them (MQTT 3.1.1 can't do that).
    pub(super) fn subscribe(
        &self,
        filters: &[String],
        as_published: Option<&str>,
    ) -> Result<(), Full> {
        let sent = match self {
            Self::V5(client) => {
                let qos = v5::mqttbytes::QoS::AtLeastOnce;
                let filters = filters.iter().map(|path| {
                    let mut filter = packet5::Filter::new(path, qos);
                    filter.preserve_retain = as_published == Some(path);
                    // We subscribe at each start; what is retained is no news then.
                    filter.retain_forward_rule = packet5::RetainForwardRule::OnNewSubscribe;
                    filter
                });
                client.try_subscribe_many(filters).is_ok()
            }
            Self::V311(client) => {
                let filters = filters
                    .iter()
                    .map(|filter| rumqttc::SubscribeFilter::new(filter.clone(), QoS::AtLeastOnce));
                client.try_subscribe_many(filters).is_ok()
            }
        };
        if sent { Ok(()) } else { Err(Full) }
    }

    /// Ends one subscription.
    pub(super) fn unsubscribe(&self, filter: &str) -> Result<(), Full> {
        let sent = match self {
            Self::V5(client) => client.try_unsubscribe(filter).is_ok(),
            Self::V311(client) => client.try_unsubscribe(filter).is_ok(),
        };
        if sent { Ok(()) } else { Err(Full) }
    }

    /// Says goodbye, so that the broker keeps the will to itself.
    pub(super) fn goodbye(&self) -> Result<(), Full> {
        let sent = match self {
            Self::V5(client) => client.try_disconnect().is_ok(),
            Self::V311(client) => client.try_disconnect().is_ok(),
        };
        if sent { Ok(()) } else { Err(Full) }
    }
}

impl Poller {
    /// Waits for the next thing to happen. After [`Seen::Broken`] or [`Seen::SaidGoodbye`] it must
    /// not be called again: the library would open a new connection by itself.
    pub(super) async fn poll(&mut self) -> Seen {
        match self {
            Self::V5(events) => match events.poll().await {
                Ok(v5::Event::Incoming(packet)) => seen5(packet),
                Ok(v5::Event::Outgoing(sent)) => seen_outgoing(&sent),
                Err(error) => broken5(&error),
            },
            Self::V311(events) => match events.poll().await {
                Ok(rumqttc::Event::Incoming(packet)) => seen311(packet),
                Ok(rumqttc::Event::Outgoing(sent)) => seen_outgoing(&sent),
                Err(error) => Seen::Broken {
                    why: error.to_string(),
                    taken_over: false,
                },
            },
        }
    }
}

fn seen_outgoing(sent: &rumqttc::Outgoing) -> Seen {
    match sent {
        rumqttc::Outgoing::Publish(packet) => Seen::Sent { packet: *packet },
        rumqttc::Outgoing::Disconnect => Seen::SaidGoodbye,
        _ => Seen::Nothing,
    }
}

fn seen5(packet: v5::Incoming) -> Seen {
    use packet5::SubscribeReasonCode;
    match packet {
        v5::Incoming::ConnAck(accepted) => Seen::Connected {
            session_present: accepted.session_present,
            max_packet: accepted.properties.and_then(|it| it.max_packet_size),
        },
        v5::Incoming::Publish(publish) => Seen::Message {
            topic: String::from_utf8_lossy(&publish.topic).into_owned(),
            payload: publish.payload,
            retained: publish.retain,
            reply_to: publish.properties.and_then(reply_to),
            packet: publish.pkid,
        },
        v5::Incoming::PubAck(answer) => Seen::Answered {
            packet: answer.pkid,
            answer: answer5(answer.reason),
        },
        v5::Incoming::SubAck(answer) => Seen::Subscribed(
            answer
                .return_codes
                .iter()
                .map(|code| match code {
                    SubscribeReasonCode::Success(_) => None,
                    refusal => Some(format!("{refusal:?}")),
                })
                .collect(),
        ),
        _ => Seen::Nothing,
    }
}

/// Where a message wants its answer.
fn reply_to(properties: packet5::PublishProperties) -> Option<ReplyTo> {
    Some(ReplyTo {
        topic: properties.response_topic?,
        correlation: properties.correlation_data.map(Vec::from),
    })
}

/// MQTT 5.0, 3.4.2.1: which refusals concern the publish itself (permission, topic, format) and
/// which the broker's present condition.
fn answer5(reason: packet5::PubAckReason) -> Answer {
    use packet5::PubAckReason::{
        ImplementationSpecificError, NoMatchingSubscribers, NotAuthorized, PacketIdentifierInUse,
        PayloadFormatInvalid, QuotaExceeded, Success, TopicNameInvalid, UnspecifiedError,
    };
    match reason {
        Success | NoMatchingSubscribers => Answer::Taken,
        NotAuthorized | TopicNameInvalid | PayloadFormatInvalid => {
            Answer::Never(format!("{reason:?}"))
        }
        UnspecifiedError | ImplementationSpecificError | PacketIdentifierInUse | QuotaExceeded => {
            Answer::NotNow(format!("{reason:?}"))
        }
    }
}

fn broken5(error: &v5::ConnectionError) -> Seen {
    let taken_over = matches!(
        error,
        v5::ConnectionError::MqttState(v5::StateError::ServerDisconnect {
            reason_code: packet5::DisconnectReasonCode::SessionTakenOver,
            ..
        })
    );
    Seen::Broken {
        why: error.to_string(),
        taken_over,
    }
}

fn seen311(packet: rumqttc::Incoming) -> Seen {
    match packet {
        rumqttc::Incoming::ConnAck(accepted) => Seen::Connected {
            session_present: accepted.session_present,
            max_packet: None,
        },
        rumqttc::Incoming::Publish(publish) => Seen::Message {
            topic: publish.topic,
            payload: publish.payload,
            retained: publish.retain,
            reply_to: None,
            packet: publish.pkid,
        },
        rumqttc::Incoming::PubAck(answer) => Seen::Answered {
            packet: answer.pkid,
            answer: Answer::Taken,
        },
        rumqttc::Incoming::SubAck(answer) => Seen::Subscribed(
            answer
                .return_codes
                .iter()
                .map(|code| match code {
                    rumqttc::SubscribeReasonCode::Success(_) => None,
                    rumqttc::SubscribeReasonCode::Failure => Some("refused".to_owned()),
                })
                .collect(),
        ),
        _ => Seen::Nothing,
    }
}
