//! One run: the plant, the broker and one life of the daemon after the other, from a seed.

use crate::auditor::{Auditor, Found};
use crate::broker::Broker;
use crate::chance::Chance;
use crate::daemon::{Breach, Daemon, Ended, Settings};
use crate::disk::{Moment, Plan, SimulatedDisk};
use crate::image::Image;
use crate::plant::{LENGTH, Plant, START, minutes};
use crate::violation::{Broken, Violation};
use holdtrue::keeper::Pace;
use holdtrue::record::{Archive, verify};
use holdtrue_engine::time::{Duration, Timestamp};
use std::collections::BTreeMap;
use std::path::{Path, PathBuf};

/// Turns after the run in which everything has to come to rest.
const REST_TURNS: usize = 300;
/// Memory as a disk, where there is such: nothing here needs to outlast the machine.
const MEMORY: &str = "/dev/shm";

/// How a life is to end; without such a choice chance decides.
pub(crate) type Ending = (u64, Moment);

/// What a run was made of.
#[derive(Clone, Debug, Default)]
pub(crate) struct Summary {
    pub(crate) found: Found,
    pub(crate) lives: u64,
    /// Lives by how they ended.
    pub(crate) endings: BTreeMap<String, u64>,
    pub(crate) operations: u64,
    pub(crate) refused: u64,
    pub(crate) acknowledged: usize,
    pub(crate) published: usize,
    pub(crate) sent_again: u64,
    pub(crate) sessions_lost: u64,
}

/// What a run is to be, besides its seed.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Course {
    pub(crate) breach: Breach,
    /// Where the first life ends.
    pub(crate) first: Option<Ending>,
    pub(crate) length: Duration,
}

impl Course {
    /// Whole and sound.
    pub(crate) const WHOLE: Self = Self {
        breach: Breach::None,
        first: None,
        length: LENGTH,
    };
}

/// Runs one seed.
pub(crate) fn run(seed: u64, course: Course) -> Result<Summary, Violation> {
    let parent = Path::new(MEMORY);
    let folder = if parent.is_dir() {
        tempfile::tempdir_in(parent)
    } else {
        tempfile::tempdir()
    };
    let folder = folder.expect("there is room for a folder");
    let mut world = World::new(seed, course, folder.path());
    world.live_through(course.first)?;
    world.come_to_rest()?;
    Ok(world.summary)
}

struct World {
    seed: u64,
    chance: Chance,
    plant: Plant,
    broker: Broker,
    auditor: Auditor,
    base: PathBuf,
    now: Timestamp,
    commit_every: Duration,
    messages_max: usize,
    pace: Pace,
    edition: usize,
    breach: Breach,
    end: Timestamp,
    summary: Summary,
}

/// Why a life was over.
enum Over {
    /// Killed between two operations of the disk.
    Killed,
    /// Told to stop.
    Stopped,
    Ended(Ended),
    /// The run is.
    Run,
}

impl World {
    fn new(seed: u64, course: Course, base: &Path) -> Self {
        let mut chance = Chance::new(seed, 0);
        Self {
            seed,
            plant: Plant::new(Chance::new(seed, 1)),
            broker: Broker::default(),
            auditor: Auditor::default(),
            base: base.to_path_buf(),
            now: START,
            commit_every: Duration::from_seconds(chance.pick(&[30, 300, 900])),
            messages_max: chance.pick(&[4, 12, 1000]),
            pace: Pace {
                inputs_of_a_file: chance.pick(&[60, 150]),
                inputs_max: chance.pick(&[20, 100, 1_000_000]),
                save_every: minutes(chance.pick(&[1, 30, 240])),
                bytes_of_an_input: chance.pick(&[1, 50, 100_000]),
            },
            edition: 0,
            breach: course.breach,
            end: START.plus(course.length),
            summary: Summary::default(),
            chance,
        }
    }

    fn folder(&self) -> PathBuf {
        self.base.join(format!("life-{}", self.summary.lives))
    }

    fn settings(&self) -> Settings {
        Settings {
            setup: self.plant.setup(self.edition),
            commit_every: self.commit_every,
            messages_max: self.messages_max,
            pace: self.pace,
            breach: self.breach,
        }
    }

    /// Lives until the run is over.
    fn live_through(&mut self, first: Option<Ending>) -> Result<(), Violation> {
        let mut ending = first;
        while self.now < self.end {
            let plan = self.plan(ending.take());
            self.live(plan)?;
        }
        Ok(())
    }

    fn plan(&mut self, ending: Option<Ending>) -> Plan {
        let is_rare = ending.is_none() && self.chance.one_in(2);
        let ending = ending.or_else(|| {
            let moment = self.chance.pick(&[
                Moment::Before,
                Moment::During,
                Moment::During,
                Moment::After,
            ]);
            // Often early, where starts are.
            let end = if is_rare {
                4
            } else {
                self.chance.pick(&[4, 30, 150])
            };
            let at = 1 + self.chance.below(end);
            let ends = !self.chance.one_in(4);
            ends.then(|| (u64::try_from(at).expect("a small number"), moment))
        });
        let refuses = self.chance.one_in(3).then(|| {
            let from = self.chance.between(1, 40).unsigned_abs();
            (from, from + self.chance.between(1, 4).unsigned_abs())
        });
        Plan {
            end: ending,
            end_is_rare: is_rare,
            refuses,
        }
    }

    /// One life, and what it leaves.
    fn live(&mut self, plan: Plan) -> Result<(), Violation> {
        let folder = self.folder();
        let next = self.base.join(format!("life-{}", self.summary.lives + 1));
        let chance = Chance::new(self.seed, 2 + self.summary.lives);
        let disk = SimulatedDisk::new(&folder, &next, plan, chance);
        let over = match self.work(&folder, &disk) {
            Ok(over) => over,
            Err(Stop::Life(ended)) => Over::Ended(ended),
            Err(Stop::Run(violation)) => return Err(violation),
        };
        let happened = disk.happened();
        self.summary.operations += happened.operations;
        self.summary.refused += happened.refused;
        self.broker.cut(&mut self.chance);
        let how = match over {
            Over::Ended(Ended::Failed(why)) => return Err(Broken::Failed.because(why)),
            Over::Ended(Ended::Died) => {
                let (operation, moment) = happened.ended.expect("that is how it died");
                format!("{moment:?} {operation}")
            }
            Over::Killed => "killed".to_owned(),
            Over::Ended(Ended::Refused) => "refused".to_owned(),
            Over::Stopped => "stopped".to_owned(),
            Over::Run => "over".to_owned(),
        };
        *self.summary.endings.entry(how).or_default() += 1;
        if happened.ended.is_none() {
            Image::of(&folder).write(&next);
        }
        std::fs::remove_dir_all(&folder).expect("the folder is ours");
        self.summary.lives += 1;
        self.now = self
            .now
            .plus(Duration::from_seconds(self.chance.between(1, 2400)));
        if self.chance.one_in(6) {
            self.broker.forget();
            self.summary.sessions_lost += 1;
        }
        if self.chance.one_in(4) {
            self.edition += 1;
        }
        self.audit()
    }

    /// Works until something ends it.
    fn work(&mut self, folder: &Path, disk: &SimulatedDisk) -> Result<Over, Stop> {
        let settings = self.settings();
        std::fs::create_dir_all(folder).expect("there is room for a folder");
        let mut daemon = Daemon::open(folder, disk, &settings, self.now)?;
        self.auditor.compare_restored(&daemon.keeper.state())?;
        daemon.begin(self.now, &mut self.broker)?;
        let turns = self.chance.between(1, 300);
        for _ in 0..turns {
            if self.now >= self.end {
                return Ok(Over::Run);
            }
            let pause = if self.plant.is_silent(self.now) {
                7200
            } else {
                self.chance.pick(&[20, 120, 400, 1500])
            };
            self.now = self
                .now
                .plus(Duration::from_seconds(self.chance.between(1, pause)));
            let messages = self.plant.up_to(self.now);
            self.broker.publish(messages);
            daemon.turn(self.now, &mut self.broker, false, &mut self.chance)?;
            if self.chance.one_in(30) {
                self.broker.cut(&mut self.chance);
                if self.chance.one_in(6) {
                    self.broker.forget();
                    self.summary.sessions_lost += 1;
                }
                daemon.note_lost(self.now, &mut self.broker)?;
            }
            if self.chance.one_in(12) {
                self.auditor.catch_up(folder)?;
                self.auditor.look_up(&self.broker)?;
            }
        }
        if self.chance.one_in(3) {
            return Ok(Over::Killed);
        }
        self.broker.work(true, &mut self.chance);
        daemon.finish(self.now)?;
        Ok(Over::Stopped)
    }

    /// Looks at what the last life left.
    fn audit(&mut self) -> Result<(), Violation> {
        let folder = self.folder();
        let archive = Archive::open(&folder)?;
        let before = self.auditor.position();
        if archive.days().is_empty() {
            let nothing = before == 0 && self.broker.acknowledged.is_empty();
            return if nothing {
                Ok(())
            } else {
                Err(Broken::Lost.because("the record is empty"))
            };
        }
        self.auditor.catch_up(&folder)?;
        self.auditor.look_up(&self.broker)?;
        let verdict = verify(&archive, None, || {})?;
        if let Some(fault) = verdict.faults.first() {
            return Err(Broken::Verification.because(fault.to_string()));
        }
        if verdict.inputs < before {
            return Err(Broken::Lost.because(format!("inputs {} to {before}", verdict.inputs + 1)));
        }
        Ok(())
    }

    /// A last life in which nothing fails: all that waits must go through, and what the broker
    /// holds then is what the record says.
    fn come_to_rest(&mut self) -> Result<(), Violation> {
        let folder = self.folder();
        let disk = SimulatedDisk::new(
            &folder,
            &self.base.join("never"),
            Plan::default(),
            Chance::new(self.seed, 2 + self.summary.lives),
        );
        let settings = self.settings();
        match self.rest(&folder, &disk, &settings) {
            Ok(()) => {}
            Err(Stop::Run(violation)) => return Err(violation),
            Err(Stop::Life(ended)) => {
                return Err(Broken::Failed.because(format!("in the last life: {ended:?}")));
            }
        }
        self.audit()?;
        self.check_seals()?;
        self.summary.operations += disk.happened().operations;
        self.summary.found = self.auditor.found;
        self.summary.acknowledged = self.broker.acknowledged.len();
        self.summary.published = self.broker.published.len();
        self.summary.sent_again = self.broker.sent_again;
        Ok(())
    }

    fn rest(
        &mut self,
        folder: &Path,
        disk: &SimulatedDisk,
        settings: &Settings,
    ) -> Result<(), Stop> {
        let mut daemon = Daemon::open(folder, disk, settings, self.now)?;
        self.auditor.compare_restored(&daemon.keeper.state())?;
        daemon.begin(self.now, &mut self.broker)?;
        for _ in 0..REST_TURNS {
            self.now = self.now.plus(settings.commit_every);
            daemon.turn(self.now, &mut self.broker, true, &mut self.chance)?;
            if daemon.is_at_rest() && self.broker.is_at_rest() {
                self.auditor.catch_up(folder)?;
                self.auditor.compare_retained(&self.broker, self.now)?;
                daemon.finish(self.now)?;
                return Ok(());
            }
        }
        Err(Stop::Run(
            Broken::Restless.because("something waits for ever"),
        ))
    }

    /// Every file is sealed, and the seal of each but the newest is noted in a later one.
    fn check_seals(&self) -> Result<(), Violation> {
        let archive = Archive::open(&self.folder())?;
        let mut noted = Vec::new();
        for name in archive.days() {
            let file = rusqlite::Connection::open_with_flags(
                archive.path(*name),
                rusqlite::OpenFlags::SQLITE_OPEN_READ_ONLY,
            );
            let notes = file.and_then(|file| {
                let mut notes = file.prepare("SELECT body FROM events WHERE kind = 'sealed'")?;
                let rows = notes.query_map([], |row| row.get::<_, String>(0))?;
                rows.collect::<rusqlite::Result<Vec<String>>>()
            });
            let notes = notes.map_err(|error| Broken::Unreadable.because(error.to_string()))?;
            noted.extend(notes);
        }
        let newest = archive.days().last();
        for name in archive.days() {
            let beside = std::fs::read_to_string(self.folder().join(name.checksum()));
            let Ok(beside) = beside else {
                return Err(Broken::Unsealed.because(format!("{name} has no checksum")));
            };
            if Some(name) != newest && !noted.contains(&beside.trim_end().to_owned()) {
                return Err(Broken::Unsealed.because(format!("no later file has that of {name}")));
            }
        }
        Ok(())
    }
}

/// What ends a life, or the whole run.
enum Stop {
    Life(Ended),
    Run(Violation),
}

impl From<Ended> for Stop {
    fn from(ended: Ended) -> Self {
        Self::Life(ended)
    }
}

impl From<Violation> for Stop {
    fn from(violation: Violation) -> Self {
        Self::Run(violation)
    }
}

impl Summary {
    /// Adds another run's.
    pub(crate) fn add(&mut self, other: &Self) {
        self.lives += other.lives;
        self.operations += other.operations;
        self.refused += other.refused;
        self.acknowledged += other.acknowledged;
        self.published += other.published;
        self.sent_again += other.sent_again;
        self.sessions_lost += other.sessions_lost;
        self.found.add(&other.found);
        for (how, count) in &other.endings {
            *self.endings.entry(how.clone()).or_default() += count;
        }
    }

    /// Many runs in which nothing happens would show nothing.
    pub(crate) fn assert_that_much_happened(&self) {
        let found = &self.found;
        for (what, count) in [
            ("readings that came twice", found.duplicates),
            ("rows supplied to the engine", found.supplied),
            ("changes of configuration", found.setups),
            ("orders", found.orders),
            ("states saved between openings", found.saved_states),
            ("starts from a record", found.restored),
            ("messages sent again", self.sent_again),
            ("sessions lost", self.sessions_lost),
            ("refusals of the disk", self.refused),
        ] {
            assert!(count >= 100, "too few {what}: {count}");
        }
        for operation in ["open", "commit", "rest", "checksum"] {
            for moment in [Moment::Before, Moment::During, Moment::After] {
                let how = format!("{moment:?} {operation}");
                let count = self.endings.get(&how).copied().unwrap_or(0);
                assert!(count >= 3, "too few lives ended \"{how}\": {count}");
            }
        }
    }
}
