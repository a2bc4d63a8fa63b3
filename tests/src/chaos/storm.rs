//! All of it together.

use std::io;
use std::path::{Path, PathBuf};
use std::time::{Duration, Instant};

use ratewright_client::{CallError, Client, Id, SettingNumber};
use ratewright_proto::v1;
use ratewright_ratio::Bounds;
use tempfile::TempDir;
use thiserror::Error;
use tokio::task::JoinSet;
use tonic::transport::Channel;
use v1::crossing_service_client::CrossingServiceClient;

use super::follower::Follower;
use super::liar;
use super::process::Process;
use super::proxy::{FATES, Proxy};

/// Bounds of every crossing: too narrow for 160/147, so that settings are cadences with a proof.
const BOUND: u64 = 64;

/// Followers that share a connection.
const ON_A_CONNECTION: usize = 8;

/// How long the daemon is away.
const AWAY: Duration = Duration::from_millis(300);

/// Followers that are not at the newest setting after this long are taken to hang.
const HANGS: Duration = Duration::from_secs(240);

/// How much of it.
#[derive(Clone, Copy, Debug)]
pub struct Plan {
    /// Followers.
    pub followers: usize,
    /// Crossings that they share.
    pub crossings: usize,
    /// Changes of settings, over all crossings.
    pub changes: u64,
    /// Restarts of the daemon in the first half, by turns killed and drained.
    pub restarts: u64,
    /// Seed of the network.
    pub seed: u64,
}

/// Why a storm broke off.
#[derive(Debug, Error)]
pub enum StormError {
    /// Files and processes.
    #[error(transparent)]
    System(#[from] io::Error),
    /// A call to the daemon that should have been answered.
    #[error(transparent)]
    Call(#[from] CallError),
    /// Anything else that should not be.
    #[error("{0}")]
    Unexpected(String),
}

/// Memory of the daemon at a moment.
#[derive(Clone, Copy, Debug)]
pub struct Memory {
    /// Changes that were acknowledged by then.
    pub changes: u64,
    /// Which life of the daemon, from 1.
    pub life: u64,
    /// KiB resident.
    pub resident_kib: u64,
}

/// What came of it.
#[derive(Debug)]
pub struct Outcome {
    /// Updates of crossings that the daemon acknowledged, each a setting.
    pub acknowledged: u64,
    /// Updates that failed because the daemon went away meanwhile; made again.
    pub failed: u64,
    /// Real time of the changes, s.
    pub changing_s: f64,
    /// Numbers of the newest settings, summed over the crossings.
    pub numbers: u64,
    /// Settings that followers were handed.
    pub handed: u64,
    /// Forged settings that were kept from them.
    pub forged: u64,
    /// Losses of contact.
    pub losses: u64,
    /// Connections by fate, in the order of [`FATES`].
    pub fates: [u64; FATES.len()],
    /// Followers that are not at the newest setting.
    pub behind: Vec<String>,
    /// Real time until all were at the newest setting after the calm, s.
    pub settling_s: f64,
    /// What must never be.
    pub wrongs: Vec<String>,
    /// Memory of the daemon.
    pub memory: Vec<Memory>,
}

impl Outcome {
    /// Memory of the daemon in its last life: after a tenth of the changes of it, a half, and all.
    pub fn last_life(&self) -> Option<[Memory; 3]> {
        let last = self.memory.last()?.life;
        let of_last: Vec<_> = self
            .memory
            .iter()
            .filter(|memory| memory.life == last)
            .collect();
        let at = |tenths: usize| *of_last[(of_last.len() - 1) * tenths / 10];
        Some([at(1), at(5), at(10)])
    }
}

/// Raises the storm, calls it off, and waits until all followers have heard the last word.
///
/// # Errors
/// [`StormError`].
pub async fn rage(plan: &Plan) -> Result<Outcome, StormError> {
    let mut house = House::start(plan).await?;
    let liar = liar::start(house.crossings().await?).await?;
    let proxy = Proxy::open(house.grpc(), liar, plan.seed).await?;
    let followers = gather(&proxy, plan).await?;
    let begun = Instant::now();
    house.change_all(plan, &proxy).await?;
    let changing_s = begun.elapsed().as_secs_f64();
    let newest = house.newest().await?;
    proxy.calm();
    let calm = Instant::now();
    let behind = || -> Vec<String> {
        let is_behind = |f: &&Follower| f.newest() != newest_of(&newest, &f.crossing);
        let name = |f: &Follower| format!("{}: {:?}", f.crossing, f.newest());
        followers.iter().filter(is_behind).map(name).collect()
    };
    while !behind().is_empty() && calm.elapsed() < HANGS {
        tokio::time::sleep(Duration::from_millis(100)).await;
    }
    let settling_s = calm.elapsed().as_secs_f64();
    let seen: Vec<_> = followers.iter().map(Follower::seen).collect();
    Ok(Outcome {
        acknowledged: house.acknowledged,
        failed: house.failed,
        changing_s,
        numbers: newest.iter().map(|(_, number)| number.number).sum(),
        handed: seen.iter().map(|s| s.settings).sum(),
        forged: seen.iter().map(|s| s.forged).sum(),
        losses: seen.iter().map(|s| s.losses).sum(),
        fates: proxy.counts(),
        behind: behind(),
        settling_s,
        wrongs: seen.into_iter().flat_map(|s| s.wrongs).collect(),
        memory: house.memory,
    })
}

fn newest_of(newest: &[(Id, SettingNumber)], crossing: &Id) -> Option<SettingNumber> {
    let found = newest.iter().find(|(id, _)| id == crossing);
    found.map(|(_, number)| *number)
}

/// Followers that come in through the storm.
async fn gather(proxy: &Proxy, plan: &Plan) -> Result<Vec<Follower>, StormError> {
    let bounds = Bounds::new(BOUND, BOUND).expect("in range");
    let address = format!("http://{}", proxy.address());
    let mut followers = Vec::new();
    while followers.len() < plan.followers {
        // A connection may be refused or cut at once: whoever wants to follow tries again.
        let Ok(client) = Client::connect(&address).await else {
            continue;
        };
        let room = plan.followers - followers.len();
        for _ in 0..room.min(ON_A_CONNECTION) {
            let crossing = id(followers.len() % plan.crossings);
            followers.push(Follower::begin(&client, &crossing, bounds));
        }
    }
    Ok(followers)
}

fn id(place: usize) -> Id {
    Id::new(&format!("line-{place}")).expect("a good name")
}

/// The daemon through all its lives.
struct House {
    config: PathBuf,
    _store: TempDir,
    process: Option<Process>,
    life: u64,
    acknowledged: u64,
    failed: u64,
    memory: Vec<Memory>,
}

impl House {
    async fn start(plan: &Plan) -> Result<Self, StormError> {
        let store = tempfile::tempdir()?;
        let config = store.path().join("ratewrightd.toml");
        std::fs::write(&config, configuration(store.path(), plan.crossings))?;
        let process = Process::start(&config)?;
        Ok(Self {
            config,
            _store: store,
            process: Some(process),
            life: 1,
            acknowledged: 0,
            failed: 0,
            memory: Vec::new(),
        })
    }

    fn process(&self) -> &Process {
        self.process
            .as_ref()
            .expect("it is away only while it restarts")
    }

    fn grpc(&self) -> std::net::SocketAddr {
        self.process().grpc()
    }

    async fn stub(&self) -> Result<CrossingServiceClient<Channel>, StormError> {
        let address = format!("http://{}", self.grpc());
        let connected = CrossingServiceClient::connect(address).await;
        connected.map_err(|error| StormError::Unexpected(error.to_string()))
    }

    /// All crossings as they stand, each with its newest setting.
    async fn crossings(&self) -> Result<Vec<v1::Crossing>, StormError> {
        let (mut all, mut page_token) = (Vec::new(), String::new());
        let mut stub = self.stub().await?;
        loop {
            let request = v1::ListCrossingsRequest {
                page_size: 500,
                page_token,
            };
            let page = stub.list_crossings(request).await;
            let page = page
                .map_err(|status| StormError::Unexpected(status.to_string()))?
                .into_inner();
            all.extend(page.crossings);
            page_token = page.next_page_token;
            if page_token.is_empty() {
                return Ok(all);
            }
        }
    }

    /// The newest setting of each crossing.
    async fn newest(&self) -> Result<Vec<(Id, SettingNumber)>, StormError> {
        let client = Client::connect(&format!("http://{}", self.grpc())).await?;
        let crossings = client.crossings().await?;
        let number = |crossing: ratewright_client::Crossing| {
            let setting = crossing.status.setting?;
            Some((crossing.declaration.id, setting.number))
        };
        Ok(crossings.into_iter().filter_map(number).collect())
    }

    /// Rounds in which every crossing is declared anew, each time with another headroom, which
    /// makes a new setting; restarts evenly over the first half of them. The second half is one life, in
    /// which the daemon's memory must stay as it is.
    async fn change_all(&mut self, plan: &Plan, proxy: &Proxy) -> Result<(), StormError> {
        let rounds = plan.changes.div_ceil(plan.crossings as u64);
        let restart_every = (rounds / 2 / plan.restarts.max(1)).max(1);
        let last_restart = restart_every * plan.restarts;
        let look_every = (rounds / 40).max(1);
        let mut stub = self.stub().await?;
        for round in 1..=rounds {
            let calls = Calls {
                stub: stub.clone(),
                headroom: 1.0 + (round % 2) as f64,
            };
            self.change_each(plan.crossings, &calls).await?;
            if round % look_every == 0 {
                self.look()?;
            }
            if round % restart_every == 0 && round <= last_restart {
                // Some changes are under way when it goes.
                let under_way = Calls {
                    stub: stub.clone(),
                    headroom: 3.0,
                };
                let under_way = under_way.all(plan.crossings);
                self.restart(proxy).await?;
                self.count(under_way.join_all().await);
                stub = self.stub().await?;
            }
        }
        self.look()
    }

    async fn change_each(&mut self, crossings: usize, calls: &Calls) -> Result<(), StormError> {
        let answers = calls.all(crossings).join_all().await;
        let failure = answers.iter().find_map(|answer| answer.as_ref().err());
        let failure = failure.map(|status| StormError::Unexpected(status.to_string()));
        self.count(answers);
        failure.map_or(Ok(()), Err)
    }

    fn count(&mut self, answers: Vec<Result<(), tonic::Status>>) {
        let acknowledged = answers.iter().filter(|answer| answer.is_ok()).count() as u64;
        self.acknowledged += acknowledged;
        self.failed += answers.len() as u64 - acknowledged;
    }

    fn look(&mut self) -> Result<(), StormError> {
        let resident_kib = self.process().resident_kib()?;
        self.memory.push(Memory {
            changes: self.acknowledged,
            life: self.life,
            resident_kib,
        });
        Ok(())
    }

    /// Killed in its odd lives, drained in its even ones.
    async fn restart(&mut self, proxy: &Proxy) -> Result<(), StormError> {
        let process = self.process.take().expect("it is there between restarts");
        let is_killed = self.life % 2 == 1;
        let end = move || {
            if is_killed {
                process.kill()
            } else {
                process.drain()
            }
        };
        blocking(end).await?;
        proxy.lead_to(None);
        tokio::time::sleep(AWAY).await;
        let config = self.config.clone();
        let process = blocking(move || Process::start(&config)).await?;
        proxy.lead_to(Some(process.grpc()));
        self.process = Some(process);
        self.life += 1;
        Ok(())
    }
}

async fn blocking<T: Send + 'static>(
    work: impl FnOnce() -> io::Result<T> + Send + 'static,
) -> io::Result<T> {
    let done = tokio::task::spawn_blocking(work).await;
    done.map_err(io::Error::other)?
}

/// Updates of crossings.
#[derive(Clone, Debug)]
struct Calls {
    stub: CrossingServiceClient<Channel>,
    headroom: f64,
}

impl Calls {
    /// One for each crossing, all at once.
    fn all(&self, crossings: usize) -> JoinSet<Result<(), tonic::Status>> {
        (0..crossings)
            .map(|place| self.clone().one(place))
            .collect()
    }

    async fn one(mut self, place: usize) -> Result<(), tonic::Status> {
        let update = v1::UpdateCrossingRequest {
            crossing: Some(v1::Crossing {
                name: format!("crossings/{}", id(place)),
                headroom_samples: self.headroom,
                ..Default::default()
            }),
            update_mask: Some(prost_types::FieldMask {
                paths: vec!["headroom_samples".to_owned()],
            }),
        };
        self.stub.update_crossing(update).await.map(|_| ())
    }
}

fn configuration(store: &Path, crossings: usize) -> String {
    let store = store.join("store");
    let mut text = format!(
        "listen = {{ grpc = \"127.0.0.1:0\", people = \"127.0.0.1:0\" }}\n\
         store.folder = {store:?}\n\
         shutdown.grace_s = 1\n\
         [[clock]]\nid = \"desk\"\nrate = \"44.1k\"\nexact = true\n\
         [[clock]]\nid = \"hall\"\nrate = \"48k\"\nexact = true\n"
    );
    for place in 0..crossings {
        let id = id(place);
        text += &format!(
            "[[crossing]]\nid = \"{id}\"\nsource = \"desk\"\nsink = \"hall\"\n\
             max_l = {BOUND}\nmax_m = {BOUND}\nheadroom_samples = 4\n"
        );
    }
    text
}
