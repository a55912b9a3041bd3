//! Settings, read once at the start: a flag, else the environment, else a default
//! that works.

use std::net::SocketAddr;
use std::path::PathBuf;

use clap::Parser;

/// The water desk of a small brewery.
#[derive(Clone, Debug, Parser)]
#[command(name = "leat", version)]
pub struct Config {
    /// The SQLite file. Made where missing.
    #[arg(long, env = "LEAT_DATABASE", default_value = "leat.sqlite")]
    pub database: PathBuf,
    /// Address and port to listen on, for example 0.0.0.0:8080 for the whole brewery.
    #[arg(long, env = "LEAT_LISTEN", default_value = "127.0.0.1:8080")]
    pub listen: SocketAddr,
    /// Fill a new database with an invented brewery and say so on every page.
    #[arg(long, env = "LEAT_DEMO", num_args = 0..=1, default_missing_value = "true", default_value_t = false)]
    pub demo: bool,
    /// Answer https by itself, with this certificate (PEM, with what leads to its root).
    #[arg(
        long,
        env = "LEAT_TLS_CERTIFICATE",
        value_name = "FILE",
        requires = "tls_key"
    )]
    pub tls_certificate: Option<PathBuf>,
    /// The private key of the certificate (PEM).
    #[arg(
        long,
        env = "LEAT_TLS_KEY",
        value_name = "FILE",
        requires = "tls_certificate"
    )]
    pub tls_key: Option<PathBuf>,
    /// Send cookies over https only. Set it when a proxy answers https for Leat; with a
    /// certificate of its own Leat does so by itself.
    #[arg(long, env = "LEAT_SECURE_COOKIES", num_args = 0..=1, default_missing_value = "true", default_value_t = false)]
    pub secure_cookies: bool,
    /// What to log, for example info, warn or leat=debug.
    #[arg(long, env = "LEAT_LOG", default_value = "info")]
    pub log: String,
    /// Log as lines of JSON.
    #[arg(long, env = "LEAT_LOG_JSON", num_args = 0..=1, default_missing_value = "true", default_value_t = false)]
    pub log_json: bool,
    /// Write a consistent copy of the database to this new file, then end.
    #[arg(long, value_name = "FILE")]
    pub back_up: Option<PathBuf>,
}
