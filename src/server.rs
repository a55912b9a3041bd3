//! Starting and ending the server.

use std::future::Future;
use std::net::SocketAddr;
use std::sync::Arc;

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
}

impl Server {
    /// Opens the database and the port.
    pub async fn open(config: &Config) -> Result<Self, Error> {
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
                secure_cookies: config.secure_cookies,
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
        })
    }

    /// Where it listens.
    pub fn address(&self) -> SocketAddr {
        self.address
    }

    /// What handlers ask for.
    pub fn app(&self) -> &App {
        &self.app
    }

    /// The address that makes the first account, while there is none.
    pub async fn first_account_address(&self) -> Result<Option<String>, Error> {
        let nobody = people::operations::nobody_yet(&self.app.db).await?;
        Ok(nobody.then(|| {
            format!(
                "http://{}/first-account?token={}",
                self.address, self.app.door.first_token
            )
        }))
    }

    /// Answers until `end` resolves, then lets running requests finish and folds the
    /// write-ahead log in.
    pub async fn run(self, end: impl Future<Output = ()> + Send + 'static) -> Result<(), Error> {
        let db = self.app.db.clone();
        let service = web::router(self.app).into_make_service_with_connect_info::<SocketAddr>();
        axum::serve(self.listener, service)
            .with_graceful_shutdown(end)
            .await
            .map_err(|error| Error::internal("The server stopped", error))?;
        db.close().await;
        Ok(())
    }
}
