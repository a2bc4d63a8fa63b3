//! `ratewright acts`: what operators did.

use clap::Args;
use ratewright_client::{Act, ActKind, Id};
use serde_json::{Value, json};

use crate::failure::Failure;
use crate::out;
use crate::out::say;
use crate::server::{self, Server};
use crate::{layout, names, show, terminal};

/// Lists what operators did to a crossing, newest first
#[derive(Debug, Args)]
pub(crate) struct Arguments {
    /// The crossing
    #[arg(value_parser = server::crossing)]
    crossing: Id,
    /// Acts to list at most
    #[arg(long, value_name = "NUMBER", default_value_t = 100)]
    most: usize,
    /// Print JSON for a machine
    #[arg(long)]
    json: bool,
    #[command(flatten)]
    server: Server,
}

pub(crate) async fn run(arguments: &Arguments) -> Result<(), Failure> {
    let client = arguments.server.connect().await?;
    let acts = match client.acts(&arguments.crossing, arguments.most).await {
        Ok(acts) => acts,
        Err(error) => {
            let wanted = std::slice::from_ref(&arguments.crossing);
            return Err(names::crossings(&client, wanted, error).await);
        }
    };
    if arguments.json {
        let acts: Vec<_> = acts.iter().map(as_json).collect();
        return say!("{:#}", Value::from(acts));
    }
    if acts.is_empty() {
        return say!("nobody has acted on {}", arguments.crossing);
    }
    // The daemon's clock is the one that the acts were timed by.
    let now_ns = client.exchange_time(|| 0).await?.t3_ns;
    let heading = ["when", "what", "by", "note"];
    let mut rows = vec![heading.map(str::to_owned).to_vec()];
    rows.extend(acts.iter().map(|act| row(act, now_ns)));
    out::prose(&layout::fitted(&rows, terminal::width()))
}

fn row(act: &Act, now_ns: i64) -> Vec<String> {
    let age_s = (now_ns - act.at_ns).max(0) as f64 * 1e-9;
    let what = match &act.what {
        ActKind::Pinned => "pinned".to_owned(),
        ActKind::Released => "released".to_owned(),
        ActKind::ChangedOver { from, to } => format!("changed over from {from} to {to}"),
    };
    vec![
        format!("{} ago", show::duration(age_s)),
        what,
        act.by.clone(),
        act.note.clone(),
    ]
}

fn as_json(act: &Act) -> Value {
    let what = match &act.what {
        ActKind::Pinned => json!("pinned"),
        ActKind::Released => json!("released"),
        ActKind::ChangedOver { from, to } => {
            json!({ "changed_over": { "from": from.as_str(), "to": to.as_str() } })
        }
    };
    json!({
        "crossing": act.crossing.as_str(),
        "by": act.by,
        "note": act.note,
        "at_ns": act.at_ns,
        "what": what,
    })
}
