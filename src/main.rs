//! The `leat` program: reads the settings, starts the server, ends it on a signal.

use std::io::IsTerminal;

use anyhow::Context;
use clap::Parser;
use leat::config::Config;
use leat::db::Db;
use leat::server::Server;
use tracing_subscriber::EnvFilter;

#[tokio::main]
async fn main() -> anyhow::Result<()> {
    let config = Config::parse();
    let filter = EnvFilter::try_new(&config.log).with_context(|| {
        format!(
            "--log (LEAT_LOG) is “{}”; write for example info or leat=debug",
            config.log
        )
    })?;
    let log = tracing_subscriber::fmt()
        .with_env_filter(filter)
        .with_ansi(std::io::stderr().is_terminal())
        .with_writer(std::io::stderr);
    if config.log_json {
        log.json().init();
    } else {
        log.init();
    }

    if let Some(file) = &config.back_up {
        anyhow::ensure!(
            !file.exists(),
            "{} exists already; name a new file",
            file.display()
        );
        anyhow::ensure!(
            config.database.exists(),
            "There is no database {}; name it with --database (LEAT_DATABASE)",
            config.database.display()
        );
        let db = Db::open(&config.database).await?;
        db.back_up(file).await?;
        tracing::info!("Wrote a copy of the database to {}", file.display());
        return Ok(());
    }

    let server = Server::open(&config).await?;
    tracing::info!("Leat answers at {}", server.url());
    if let Some(address) = server.first_account_address().await? {
        tracing::info!("Nobody has an account yet. Make the first one at {address}");
    }
    server.run(signalled()).await?;
    Ok(())
}

/// Resolves on Ctrl-C, or when the system asks the program to end.
async fn signalled() {
    use tokio::signal::unix::{SignalKind, signal};
    let Ok(mut terminate) = signal(SignalKind::terminate()) else {
        let _ = tokio::signal::ctrl_c().await;
        return;
    };
    tokio::select! {
        _ = tokio::signal::ctrl_c() => {}
        _ = terminate.recv() => {}
    }
}
