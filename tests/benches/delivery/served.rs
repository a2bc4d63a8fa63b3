//! The daemon, as a process to be measured, with what the load asks of it.

use ratewright_server::{
    Daemon,
    config::{Config, parse},
};

/// Clocks that readings are of, one for each stream.
pub(crate) const CLOCKS: usize = 4;

/// Serves until it is killed.
pub(crate) async fn serve(folder: &str) {
    let mut text = String::from(
        "[listen]\ngrpc = '127.0.0.1:0'\npeople = '127.0.0.1:0'\n\
         [[clock]]\nid = 'house'\nrate = 48000\nexact = true\n\
         [[crossing]]\nid = 'line'\nsource = 'clock-0'\nsink = 'house'\nheadroom_samples = 48\n",
    );
    for i in 0..CLOCKS {
        text += &format!("[[clock]]\nid = 'clock-{i}'\nrate = 48000\n");
    }
    let config = Config {
        store: folder.into(),
        ..parse(&text).expect("a configuration")
    };
    let daemon = Daemon::builder(config).start().await.expect("it starts");
    println!("{}", daemon.grpc());
    std::future::pending::<()>().await;
}
