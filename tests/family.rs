//! A family of timetables like the ones users have, with an answer known by construction.
//!
//! Distributions. Rooms: seats from twelve sizes (12 to 400), each of three offers with
//! chances 50, 35 and 20 %; a quarter as many spare rooms as the hidden plan uses. Days from
//! 08:00 to 20:00 in steps of five minutes, two days for up to 400 requests, five above;
//! rooms are open all day or (kind `shifts`) mornings 08:00-13:00 or afternoons 13:00-20:00
//! as well. The hidden plan fills every used room on every day with requests of 30 to 180
//! minutes (30, 60, 90, 120, 180 with weights 2, 4, 4, 3, 1) and pauses of 0 to 45 minutes
//! (in half the timetables, the dense ones, 0 to 10); half keep 5 or 10 minutes free after
//! everything. A request is as large as its room demands (above the next smaller size) in
//! half of the cases (three quarters in dense ones), else it would fit a room of any smaller
//! size; it needs each offer of its room with a chance of 30 %. One
//! request in ten is pinned, all of them on two rooms in five.
//!
//! Why the hidden plan is the best, by kind (one after the other by seed):
//! - `moment`: at 11:00 on one day all used rooms are taken: an overlap clique.
//! - `shifts`: at 10:00 on one day all rooms open all day and all mornings' rooms in use are
//!   taken, at 16:00 on another all rooms open all day and all afternoons' rooms, each time by
//!   requests too large for the spare rooms that are open all day. All of the former are
//!   needed twice over, so the two shifts come on top of them.
//! - `needs`: half the rooms offer a laboratory, the others a stage; at one time all the
//!   former are taken by requests that need it, at another all the latter.
//! - `pins`: each room of the two in five has a pin, at any time, and at 11:00 on one day all
//!   the others are taken by requests too large for these.

use std::fmt::Write;

/// Seats a room may have.
const SEATS: [u32; 12] = [12, 16, 20, 24, 30, 40, 60, 80, 120, 180, 260, 400];

/// What a room may offer.
const OFFERS: [&str; 3] = ["step-free", "laboratory", "stage"];

/// One timetable of the family.
pub(crate) struct Made {
    /// As a file.
    pub(crate) text: String,
    /// The fewest rooms, by construction.
    pub(crate) answer: usize,
    /// Which construction.
    pub(crate) kind: &'static str,
}

/// SplitMix64 (Steele, Lea, Flood 2014).
pub(crate) struct Dice(pub(crate) u64);

impl Dice {
    pub(crate) fn below(&mut self, bound: usize) -> usize {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        ((u128::from(z ^ (z >> 31)) * bound as u128) >> 64) as usize
    }

    fn chance(&mut self, percent: usize) -> bool {
        self.below(100) < percent
    }
}

struct Room {
    level: usize,
    offers: [bool; 3],
    /// Minutes of the day.
    open: (i64, i64),
    used: bool,
    /// Whether pins may fall on it.
    pins: bool,
}

struct Asked {
    room: usize,
    day: i64,
    start: i64,
    end: i64,
    size: u32,
    needs: [bool; 3],
    pinned: bool,
    /// Part of the reason why not fewer.
    witness: bool,
}

/// What a whole timetable has in common.
struct Manner {
    /// Minutes kept free after everything.
    after: i64,
    kind: &'static str,
    /// Hardly any pauses, and mostly requests that need all of their room.
    dense: bool,
}

const DAY: (i64, i64) = (8 * 60, 20 * 60);
const MORNING: (i64, i64) = (8 * 60, 13 * 60);
const AFTERNOON: (i64, i64) = (13 * 60, 20 * 60);

fn rooms(kind: &str, used: usize, dice: &mut Dice) -> Vec<Room> {
    let spare = (used / 4).max(2);
    let mut rooms: Vec<Room> = (0..used + spare)
        .map(|at| {
            let is_used = at < used;
            let pins = is_used && at % 5 < 2;
            let mut room = Room {
                level: 1 + dice.below(11),
                offers: [dice.chance(50), dice.chance(35), dice.chance(20)],
                open: DAY,
                used: is_used,
                pins,
            };
            match kind {
                "shifts" => match (dice.below(4), is_used) {
                    (0, _) => room.open = MORNING,
                    (1, _) => room.open = AFTERNOON,
                    (_, true) => {}
                    (_, false) => room.level = 0,
                },
                "needs" => {
                    let laboratory = at % 2 == 0;
                    (room.offers[1], room.offers[2]) = (laboratory, !laboratory);
                }
                "pins" if pins => room.level = 1 + dice.below(5),
                "pins" => room.level = 6 + dice.below(6),
                _ => {}
            }
            room
        })
        .collect();
    // Resources are listed in no particular order.
    for at in (1..rooms.len()).rev() {
        rooms.swap(at, dice.below(at + 1));
    }
    rooms
}

/// The moment (day, minute) at which a room must be taken.
fn moments(kind: &str, room: &Room, days: i64) -> Vec<(i64, i64)> {
    let (first, last) = (0, days - 1);
    match kind {
        "moment" => vec![(first, 11 * 60)],
        "pins" if !room.pins => vec![(first, 11 * 60)],
        "needs" if room.offers[1] => vec![(first, 10 * 60)],
        "needs" => vec![(last, 15 * 60)],
        "shifts" => {
            let morning = (room.open != AFTERNOON).then_some((first, 10 * 60));
            let afternoon = (room.open != MORNING).then_some((last, 16 * 60));
            morning.into_iter().chain(afternoon).collect()
        }
        _ => Vec::new(),
    }
}

/// The requests of one room on one day.
fn fill(
    (at, room): (usize, &Room),
    (day, moment): (i64, Option<i64>),
    manner: &Manner,
    dice: &mut Dice,
    asked: &mut Vec<Asked>,
) {
    let Manner { after, kind, dense } = *manner;
    let mut now = room.open.0 + 5 * dice.below(10) as i64;
    loop {
        let lengths = [30, 30, 60, 60, 60, 60, 90, 90, 90, 90, 120, 120, 120, 180];
        let mut length = lengths[dice.below(lengths.len())];
        let mut witness = false;
        if let Some(moment) = moment.filter(|moment| *moment >= now) {
            // Nothing may end so near the moment that nothing fits around it.
            if now + length + after > moment - 5 {
                length = length.max(moment + 5 + 5 * dice.below(6) as i64 - now);
                length = length.min(room.open.1 - after - now);
                witness = true;
            }
        }
        if now + length + after > room.open.1 {
            return;
        }
        let tight = witness || dice.chance(if dense { 75 } else { 50 });
        let level = if tight {
            room.level
        } else {
            dice.below(room.level + 1)
        };
        let below = if level == 0 { 4 } else { SEATS[level - 1] };
        let mut size = below + 1 + dice.below((SEATS[level] - below) as usize) as u32;
        let mut needs = [false; 3];
        for (need, offer) in needs.iter_mut().zip(room.offers) {
            *need = offer && dice.chance(30);
        }
        if witness {
            match kind {
                "needs" => (needs[1], needs[2]) = (room.offers[1], room.offers[2]),
                "pins" => size = size.max(SEATS[5] + 1),
                _ => {}
            }
        }
        asked.push(Asked {
            room: at,
            day,
            start: now,
            end: now + length,
            size,
            needs,
            pinned: false,
            witness,
        });
        now += length + after;
        let pause = 5 * dice.below(if dense { 3 } else { 10 }) as i64;
        // A pause must leave room for something that reaches over the moment.
        now = match moment.filter(|moment| *moment >= now) {
            Some(moment) => (now + pause).min(moment - 5),
            None => now + pause,
        };
    }
}

/// A timetable of about `n` requests (never more), from a seed.
pub(crate) fn make(n: usize, seed: u64) -> Made {
    let mut dice = Dice(seed.wrapping_mul(0x5851_f42d_4c95_7f2d) + n as u64);
    let kind = ["moment", "shifts", "needs", "pins"][(seed % 4) as usize];
    let days: i64 = if n <= 400 { 2 } else { 5 };
    // About six requests fit a room and day; half days halve that.
    let per_room = days as usize * if kind == "shifts" { 9 } else { 11 } / 2;
    let used = (n.div_ceil(per_room)).max(4);
    let after = [0, 0, 5, 10][dice.below(4)];
    let dense = seed / 4 % 2 == 1;
    let manner = Manner { after, kind, dense };
    let rooms = rooms(kind, used, &mut dice);
    let mut asked = Vec::new();
    for (at, room) in rooms.iter().enumerate().filter(|(_, room)| room.used) {
        let moments = moments(kind, room, days);
        for day in 0..days {
            let moment = moments.iter().find(|(on, _)| *on == day).map(|(_, at)| *at);
            fill((at, room), (day, moment), &manner, &mut dice, &mut asked);
        }
    }
    // Shuffled, so that the file tells nothing of the hidden plan; then down to n.
    for at in (1..asked.len()).rev() {
        asked.swap(at, dice.below(at + 1));
    }
    let mut pinned: Vec<usize> = rooms.iter().map(|_| 0).collect();
    for asked in asked.iter_mut().filter(|asked| rooms[asked.room].pins) {
        // In the kind that rests on pins, each of these rooms keeps its first.
        asked.pinned = kind == "pins" && pinned[asked.room] == 0;
        asked.witness |= asked.pinned;
        pinned[asked.room] += 1;
    }
    while asked.len() > n {
        let Some(at) = asked.iter().rposition(|asked| !asked.witness) else {
            break;
        };
        asked.remove(at);
    }
    let mut pins = asked.iter().filter(|asked| asked.pinned).count();
    let tenth = asked.len() / 10;
    for asked in asked.iter_mut().filter(|asked| rooms[asked.room].pins) {
        if pins < tenth && !asked.pinned {
            asked.pinned = true;
            pins += 1;
        }
    }
    Made {
        text: print(&rooms, &asked, after),
        answer: used,
        kind,
    }
}

fn print(rooms: &[Room], asked: &[Asked], after: i64) -> String {
    let mut text = format!(
        "[timetable]\ntitle = \"family\"\nnoun = [\"room\", \"rooms\"]\nturnaround = \"{after}m\"\n"
    );
    let offered = |mask: &[bool; 3]| -> String {
        let names = OFFERS.iter().zip(mask).filter(|(_, has)| **has);
        let names: Vec<String> = names.map(|(name, _)| format!("\"{name}\"")).collect();
        names.join(", ")
    };
    let clock = |minute: i64| format!("{:02}:{:02}", minute / 60, minute % 60);
    for (at, room) in rooms.iter().enumerate() {
        let _ = writeln!(
            text,
            "[[resource]]\nid = \"room-{at}\"\nseats = {}\noffers = [{}]\nopen = [{{ days = \"mon-fri\", from = \"{}\", to = \"{}\" }}]",
            SEATS[room.level],
            offered(&room.offers),
            clock(room.open.0),
            clock(room.open.1)
        );
    }
    for (at, asked) in asked.iter().enumerate() {
        let _ = writeln!(
            text,
            "[[request]]\nid = \"r{at}\"\nstart = 2027-01-{:02}T{}:00\nlength = \"{}m\"\nsize = {}\nneeds = [{}]",
            11 + asked.day,
            clock(asked.start),
            asked.end - asked.start,
            asked.size,
            offered(&asked.needs)
        );
        if asked.pinned {
            let _ = writeln!(text, "pin = \"room-{}\"", asked.room);
        }
    }
    text
}

/// A term of fifteen weeks: `n` weekly requests, each kept together, on `rooms` rooms.
///
/// Rooms: seats from the twelve sizes, each offer with chances 50, 35 and 20 %, open Monday
/// to Friday 08:00 to 20:00, 10 minutes kept free after everything. A hidden plan puts a
/// request on a random room and a free time there (from 08:00 in steps of 15 minutes; 45,
/// 60, 90, 105 or 165 minutes): it is as large as half to all of the room, needs each offer
/// of the room with a chance of 30 %, and one in twenty leaves out a date. So all of it can
/// be placed; the fewest rooms are not known, only that they are at most `rooms`.
pub(crate) fn term(n: usize, rooms: usize, seed: u64) -> Made {
    const LENGTHS: [i64; 5] = [45, 60, 90, 105, 165];
    let mut dice = Dice(seed);
    let mut text = "[timetable]\ntitle = \"Term\"\nzone = \"Europe/Lisbon\"\nnoun = [\"room\", \"rooms\"]\nturnaround = \"10m\"\n".to_string();
    let hall = |dice: &mut Dice| {
        let offers: Vec<usize> = [50, 35, 20]
            .into_iter()
            .enumerate()
            .filter(|(_, percent)| dice.chance(*percent))
            .map(|(offer, _)| offer)
            .collect();
        (SEATS[dice.below(SEATS.len())], offers)
    };
    let halls: Vec<(u32, Vec<usize>)> = (0..rooms).map(|_| hall(&mut dice)).collect();
    let quoted = |offers: &[usize]| {
        let names: Vec<String> = offers
            .iter()
            .map(|o| format!("\"{}\"", OFFERS[*o]))
            .collect();
        names.join(", ")
    };
    for (at, (seats, offers)) in halls.iter().enumerate() {
        let _ = writeln!(
            text,
            "\n[[resource]]\nid = \"room-{at}\"\nseats = {seats}\noffers = [{}]\nopen = [{{ days = \"mon-fri\", from = \"08:00\", to = \"20:00\" }}]",
            quoted(offers)
        );
    }
    let mut taken: Vec<Vec<(i64, i64)>> = vec![Vec::new(); rooms * 5];
    let mut made = 0;
    while made < n {
        let (room, day) = (dice.below(rooms), dice.below(5));
        let length = LENGTHS[dice.below(5)];
        let start = 8 * 60 + 15 * dice.below(((12 * 60 - length - 10) / 15 + 1) as usize) as i64;
        let (seats, offers) = &halls[room];
        let slots = &mut taken[room * 5 + day];
        if slots
            .iter()
            .any(|(from, to)| start < to + 10 && *from < start + length + 10)
        {
            continue;
        }
        slots.push((start, start + length));
        let size = seats / 2 + dice.below((seats / 2) as usize + 1) as u32;
        let needs: Vec<usize> = offers.iter().copied().filter(|_| dice.chance(30)).collect();
        // 2027-02-01 is a Monday; no clock changes before the end of March.
        let _ = write!(
            text,
            "\n[[request]]\nid = \"course-{made}\"\nstart = 2027-02-{:02}T{:02}:{:02}:00\nlength = \"{length}m\"\nsize = {size}\nneeds = [{}]\nrepeat = \"FREQ=WEEKLY;COUNT=15\"\ntogether = true\n",
            1 + day,
            start / 60,
            start % 60,
            quoted(&needs)
        );
        if dice.chance(5) {
            let date = 1 + day + 7 * (1 + dice.below(3));
            let _ = writeln!(text, "except = [2027-02-{date:02}]");
        }
        made += 1;
    }
    Made {
        text,
        answer: rooms,
        kind: "term",
    }
}
