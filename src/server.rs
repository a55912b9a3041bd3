//! Starting and ending the server.

use std::future::Future;
use std::net::SocketAddr;
use std::path::Path;
use std::sync::Arc;
use std::time::Duration;

use axum_server::tls_rustls::{RustlsConfig, from_tcp_rustls};
use base64ct::{Base64UrlUnpadded, Encoding};
use tokio::net::TcpListener;

use crate::config::Config;
use crate::db::Db;
use crate::demo;
use crate::error::Error;
use crate::people::{self, passwords::Passwords};
use crate::web::throttle::Throttle;
use crate::web::{self, App, Door};

/// A server ready to answer.
pub struct Server {
    app: App,
    listener: TcpListener,
    address: SocketAddr,
    tls: Option<RustlsConfig>,
}

/// At the end, requests over https may take this much longer.
const GRACE: Duration = Duration::from_secs(30);

impl Server {
    /// Opens the database and the port.
    pub async fn open(config: &Config) -> Result<Self, Error> {
        let tls = match (&config.tls_certificate, &config.tls_key) {
            (Some(certificate), Some(key)) => Some(tls(certificate, key).await?),
            _ => None,
        };
        let db = Db::open(&config.database).await?;
        let passwords = Passwords::start()?;
        if config.demo {
            demo::fill(&db, &passwords).await?;
        }
        let mut token = [0_u8; 18];
        getrandom::fill(&mut token)
            .map_err(|error| Error::internal("No random numbers could be had", error))?;
        let throttle = Throttle::new()
            .ok_or_else(|| Error::internal("The limits on signing in are wrong", "zero"))?;
        let app = App {
            db,
            passwords,
            throttle: Arc::new(throttle),
            door: Arc::new(Door {
                secure_cookies: config.secure_cookies || tls.is_some(),
                first_token: Base64UrlUnpadded::encode_string(&token),
            }),
        };
        let listener = TcpListener::bind(config.listen).await.map_err(|error| {
            Error::internal("The address could not be listened on; choose another with --listen, for example 127.0.0.1:8081", error)
        })?;
        let address = listener
            .local_addr()
            .map_err(|error| Error::internal("The port could not be read", error))?;
        Ok(Self {
            app,
            listener,
            address,
            tls,
        })
    }

    /// Where it listens.
    pub fn address(&self) -> SocketAddr {
        self.address
    }

    /// The same as one types it into a browser.
    pub fn url(&self) -> String {
        let scheme = if self.tls.is_some() { "https" } else { "http" };
        format!("{scheme}://{}", self.address)
    }

    /// What handlers ask for.
    pub fn app(&self) -> &App {
        &self.app
    }

    /// The address that makes the first account, while there is none.
    pub async fn first_account_address(&self) -> Result<Option<String>, Error> {
        let nobody = people::operations::nobody_yet(&self.app.db).await?;
        Ok(nobody.then(|| {
            let (url, token) = (self.url(), &self.app.door.first_token);
            format!("{url}/first-account?token={token}")
        }))
    }

    /// Answers until `end` resolves, then lets running requests finish and folds the
    /// write-ahead log in.
    pub async fn run(self, end: impl Future<Output = ()> + Send + 'static) -> Result<(), Error> {
        let db = self.app.db.clone();
        let service = web::router(self.app).into_make_service_with_connect_info::<SocketAddr>();
        let stopped = match self.tls {
            None => {
                axum::serve(self.listener, service)
                    .with_graceful_shutdown(end)
                    .await
            }
            Some(tls) => {
                let handle = axum_server::Handle::new();
                let ending = handle.clone();
                tokio::spawn(async move {
                    end.await;
                    ending.graceful_shutdown(Some(GRACE));
                });
                let listener = self.listener.into_std();
                match listener.and_then(|listener| from_tcp_rustls(listener, tls)) {
                    Ok(server) => server.handle(handle).serve(service).await,
                    Err(error) => Err(error),
                }
            }
        };
        stopped.map_err(|error| Error::internal("The server stopped", error))?;
        db.close().await;
        Ok(())
    }
}

/// What a certificate and its key make of a connection. HTTP/1.1 alone: its requests name
/// their host in a header of their own, which tells our own pages from others.
async fn tls(certificate: &Path, key: &Path) -> Result<RustlsConfig, Error> {
    let read = async |file: &Path, context| {
        let bytes = tokio::fs::read(file).await;
        bytes.map_err(|error| Error::internal(context, format!("{}: {error}", file.display())))
    };
    let certificate = read(
        certificate,
        "The certificate could not be read; name a PEM file with --tls-certificate (LEAT_TLS_CERTIFICATE), for example /etc/leat/certificate.pem",
    );
    let key = read(
        key,
        "The key of the certificate could not be read; name a PEM file with --tls-key (LEAT_TLS_KEY), for example /etc/leat/key.pem",
    );
    let tls = RustlsConfig::from_pem(certificate.await?, key.await?)
        .await
        .map_err(|error| {
            Error::internal(
                "The certificate and its key cannot be used; both are PEM files that belong together, named with --tls-certificate (LEAT_TLS_CERTIFICATE) and --tls-key (LEAT_TLS_KEY)",
                error,
            )
        })?;
    let mut config = (*tls.get_inner()).clone();
    config.alpn_protocols = vec![b"http/1.1".to_vec()];
    Ok(RustlsConfig::from_config(Arc::new(config)))
}
