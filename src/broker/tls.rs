//! Encryption of the link: certificates from PEM files, one crypto provider named in code.
//!
//! The client library's own loading of certificates is not used: it would pick a process-wide
//! provider (none or two of them panic) and parses keys with an outdated crate.

use crate::configuration::Tls;
use std::path::PathBuf;
use std::sync::Arc;
use tokio_rustls::rustls::crypto::ring;
use tokio_rustls::rustls::pki_types::pem::{self, PemObject};
use tokio_rustls::rustls::pki_types::{CertificateDer, PrivateKeyDer};
use tokio_rustls::rustls::{self, ClientConfig, RootCertStore};

/// Why encryption can't be set up.
#[derive(Debug, thiserror::Error)]
pub enum TlsError {
    /// A file can't be read as PEM.
    #[error("{}: {source}", path.display())]
    File {
        /// Which file.
        path: PathBuf,
        /// What is wrong.
        source: pem::Error,
    },
    /// The file with trusted certificates has none.
    #[error("{} holds no certificate", path.display())]
    NoCertificate {
        /// Which file.
        path: PathBuf,
    },
    /// A certificate or key does not fit.
    #[error("TLS: {0}")]
    Refused(#[from] rustls::Error),
}

/// What the client needs to open encrypted connections.
///
/// # Errors
/// When a file can't be read or its content can't be used.
pub(super) fn client_config(tls: &Tls) -> Result<Arc<ClientConfig>, TlsError> {
    let mut roots = RootCertStore::empty();
    for certificate in certificates(&tls.ca_file)? {
        roots.add(certificate)?;
    }
    let builder = ClientConfig::builder_with_provider(Arc::new(ring::default_provider()))
        .with_safe_default_protocol_versions()?
        .with_root_certificates(roots);
    let config = match &tls.client {
        None => builder.with_no_client_auth(),
        Some(client) => {
            let key =
                PrivateKeyDer::from_pem_file(&client.key).map_err(|source| TlsError::File {
                    path: client.key.clone(),
                    source,
                })?;
            builder.with_client_auth_cert(certificates(&client.certificate)?, key)?
        }
    };
    Ok(Arc::new(config))
}

fn certificates(path: &PathBuf) -> Result<Vec<CertificateDer<'static>>, TlsError> {
    let failed = |source| TlsError::File {
        path: path.clone(),
        source,
    };
    let found: Vec<_> = CertificateDer::pem_file_iter(path)
        .map_err(failed)?
        .collect::<Result<_, _>>()
        .map_err(failed)?;
    if found.is_empty() {
        return Err(TlsError::NoCertificate { path: path.clone() });
    }
    Ok(found)
}
