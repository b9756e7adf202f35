//! The one cluster of a test run. Statics are never dropped: the keeper ends the server and removes its folder
//! when this process is gone, however it went.

use realterms::config::Settings;
use realterms::store::cluster::{Cluster, ClusterOptions, fresh_folder};
use std::sync::OnceLock;

/// The cluster, started by the first test that asks.
pub(crate) fn shared() -> &'static Cluster {
    static CLUSTER: OnceLock<Cluster> = OnceLock::new();
    CLUSTER.get_or_init(|| Cluster::start(&forgetful()).expect("the cluster of the tests starts"))
}

/// A fresh cluster that forces nothing to disk and is removed with its holder.
pub(crate) fn forgetful() -> ClusterOptions {
    let folder = fresh_folder(&std::env::temp_dir()).expect("the temp folder takes a folder");
    let settings = Settings {
        data_folder: Some(folder),
        ..Settings::default()
    };
    ClusterOptions {
        keeper: env!("CARGO_BIN_EXE_realterms").into(),
        durable: false,
        disposable: true,
        ..settings.cluster("a test").expect("a folder is set")
    }
}
