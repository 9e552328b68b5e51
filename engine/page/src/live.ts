// What the page knows, as the server pushes it.
import { batch, computed, signal, type Signal } from "@preact/signals";
import type { AlarmRecord } from "../../client/web/leadline/v1/alarm_pb.js";
import type { Belief } from "../../client/web/leadline/v1/belief_pb.js";
import { Detail } from "../../client/web/leadline/v1/follow_pb.js";
import { Status, type Posterior } from "../../client/web/leadline/v1/posterior_pb.js";
import type { RecentMeasurement } from "../../client/web/leadline/v1/trail_pb.js";
import { calls, sentence, soon } from "./api";
import { follow, type Link } from "./follow";
import { millis } from "./format";
import type { LonLat } from "./project";
import { worry, type Known } from "./worry";

/** Vehicles by name; each has a signal of its own, so that a row is drawn alone. */
export const fleet = new Map<string, Signal<Known>>();

/** Names, worst first. */
export const order = signal<string[]>([]);

/** Records of alarms by number. */
export const alarms = signal<ReadonlyMap<bigint, AlarmRecord>>(new Map());
export const openAlarms = computed(() => [...alarms.value.values()].filter((a) => !a.clearedAt));

/** Roads whose traffic is heard, by name, as the server last said; and whether it has said so. */
export const roads = signal<ReadonlyMap<string, { drive: string; ended: boolean }>>(new Map());
export const roadsKnown = signal(false);

export const link = signal<Link>({ state: "connecting", why: "" });

/** When news last came, by the page's clock, ms; 0 before the first. */
export const heardAt = signal(0);

/** A point in time of the chosen vehicle's past. */
export type Past = { ms: number; at: LonLat; located: boolean; radius95M: number; logEvidence: number; nuisances: Record<string, [number, number, string]> };

/** The chosen vehicle. */
export const chosen = signal("");
export type Close = { posterior: Posterior; belief?: Belief; recent: RecentMeasurement[]; receivedAt: number };
export const close = signal<Close | undefined>(undefined);
export const past = signal<Past[]>([]);
export const closeTrouble = signal("");
/** The last satellite fix that came. */
export const fix = signal<{ at: LonLat; sigmaM: number; ms: number } | undefined>(undefined);

/** Why nothing is known of the chosen vehicle, in words. */
export const nobody = () => closeTrouble.value || `No vehicle ${chosen.value} is here yet. Its news shows as soon as there is any.`;

/** The chosen vehicle as the list knows it. */
export const chosenKnown = computed(() => (order.value.includes(chosen.value) ? fleet.get(chosen.value)?.value : undefined));

const waiting = new Map<string, Known>();
let scheduled = false;

/** Puts news into the signals, at most ten times a second. */
function apply() {
  scheduled = false;
  batch(() => {
    let more = false;
    for (const [name, known] of waiting) {
      const s = fleet.get(name);
      if (s) s.value = known;
      else {
        fleet.set(name, signal(known));
        more = true;
      }
    }
    waiting.clear();
    if (more) sort();
  });
}

function put(name: string, known: Known) {
  waiting.set(name, known);
  if (scheduled) return;
  scheduled = true;
  setTimeout(apply, 100);
}

function sort() {
  const now = Date.now();
  const by = [...fleet].map(([name, s]) => ({ name, worry: worry(s.peek(), now) }));
  by.sort((a, b) => b.worry - a.worry || a.name.localeCompare(b.name));
  let names = by.map((v) => v.name);
  if (now < held) {
    const before = order.peek();
    names = [...before.filter((name) => fleet.has(name)), ...names.filter((name) => !before.includes(name))];
  }
  if (names.join("\n") !== order.peek().join("\n")) order.value = names;
}

// A list that moves under the finger helps nobody: once a second is enough, and not
// while somebody points at it.
setInterval(sort, 1000);
let held = 0;

/** Has the vehicles keep their places for a while; new ones come last. */
export const holdOrder = () => {
  held = Date.now() + 3000;
};

const latest = (name: string) => waiting.get(name) ?? fleet.get(name)?.peek();

/** Whether a posterior came after an earlier one of its drive, so that its age tells of clocks and delays alone. */
function goesOn(name: string, drive: string, p: Posterior): boolean {
  const k = latest(name);
  return k?.drive === drive && (k.moves || millis(k.posterior.time!) !== millis(p.time!));
}

function over(name: string, why: string) {
  const k = latest(name);
  if (k && k.over !== why) put(name, { ...k, over: why });
}

/** What the server does not know any more is said to be so. */
async function check() {
  const here = new Set<string>();
  let pageToken = "";
  try {
    do {
      const page = await calls.listVehicles({ pageSize: 1000, pageToken }, soon);
      for (const v of page.vehicles) here.add(v.vehicle);
      pageToken = page.nextPageToken;
    } while (pageToken);
  } catch {
    return; // the stream says what is wrong
  }
  for (const name of new Set([...fleet.keys(), ...waiting.keys()])) {
    if (!here.has(name)) over(name, "The server does not know this vehicle any more: it was started anew, or made room.");
  }
}

/** Begins to follow all vehicles. */
export function start() {
  follow(
    { detail: Detail.MODES, minIntervalS: 0.2, alarms: true, roads: true },
    {
      link: (l) => (link.value = l),
      begins: (fresh) => {
        heardAt.value = Date.now();
        roads.value = new Map(); // they are told anew
        roadsKnown.value = true;
        if (!fresh) return;
        alarms.value = new Map();
        void check();
      },
      news: (m) => {
        heardAt.value = Date.now();
        switch (m.news.case) {
          case "posterior":
            put(m.vehicle, { vehicle: m.vehicle, drive: m.drive, posterior: m.news.value, receivedAt: Date.now(), over: "", moves: goesOn(m.vehicle, m.drive, m.news.value) });
            break;
          case "farewell":
            over(m.vehicle, m.news.value.ended ? "The drive has ended." : `No more news: ${m.news.value.reason}.`);
            break;
          case "road": {
            const { gone, ended } = m.news.value;
            const next = new Map(roads.value);
            if (gone) next.delete(m.vehicle);
            else next.set(m.vehicle, { drive: m.drive, ended });
            roads.value = next;
            break;
          }
          case "alarm": {
            const next = new Map(alarms.value);
            next.set(m.news.value.number, m.news.value);
            alarms.value = next;
            break;
          }
        }
      },
    },
  );
}

let leave = () => {};

/** Follows one vehicle closely. */
export function choose(name: string) {
  if (name === chosen.value) return;
  batch(() => {
    chosen.value = name;
    close.value = undefined;
    past.value = [];
    fix.value = undefined;
    closeTrouble.value = "";
  });
  followClosely();
}

/** As many as can be drawn at once. */
const beliefCells = 1 << 20;

const pastMost = 2000;

/** Adds a point, in order; one of its time is replaced. */
export function withPoint(points: Past[], p: Past): Past[] {
  let i = points.length;
  while (i > 0 && points[i - 1].ms > p.ms) i--;
  const out = points.slice();
  if (i > 0 && points[i - 1].ms === p.ms) out[i - 1] = p;
  else out.splice(i, 0, p);
  // The older half is thinned.
  return out.length <= pastMost ? out : out.filter((_, j) => j % 2 === 0 || j > pastMost / 2);
}

function pointOf(p: Posterior): Past {
  const nuisances: Past["nuisances"] = {};
  for (const n of p.nuisances) nuisances[n.name] = [n.mean, n.sigma, n.unit];
  return {
    ms: millis(p.time!),
    at: { lon: p.mean!.lon!, lat: p.mean!.lat! },
    located: p.status === Status.LOCATED,
    radius95M: p.radii!.radius95M,
    logEvidence: p.logEvidence,
    nuisances,
  };
}

function followClosely() {
  leave();
  leave = () => {};
  const name = chosen.value;
  if (!name || document.hidden) return; // a tab that nobody sees holds no stream
  let drive = "";
  let remembers = false;
  leave = follow(
    { vehicles: [name], detail: Detail.BELIEF, minIntervalS: 0.1, beliefCells },
    {
      link: (l) => (closeTrouble.value = l.why),
      begins: () => (remembers = false),
      news: (m) => {
        if (name !== chosen.value) return;
        if (m.news.case === "withdrawn") {
          const gone = new Set(m.news.value.times.map(millis));
          past.value = past.value.filter((p) => !gone.has(p.ms));
        }
        if (m.news.case !== "posterior") return;
        const posterior = m.news.value;
        if (!remembers) {
          remembers = true; // not before: there may be no such vehicle
          void remember(name);
        }
        batch(() => {
          if (drive && drive !== m.drive) past.value = [];
          drive = m.drive;
          past.value = withPoint(past.value, pointOf(posterior));
          for (const r of m.recent) {
            const z = r.measurement?.measurement?.kind;
            if (z?.case !== "fix" || r.refusal || !r.measurement?.time) continue;
            fix.value = { at: { lon: z.value.lon!, lat: z.value.lat! }, sigmaM: z.value.sigmaM, ms: millis(r.measurement.time) };
          }
          close.value = { posterior, belief: m.belief, recent: m.recent, receivedAt: Date.now() };
        });
      },
    },
  );
}

document.addEventListener("visibilitychange", () => {
  if (chosen.value) followClosely();
});

/** Fetches the chosen vehicle's past. */
async function remember(name: string) {
  try {
    const trail = await calls.trail({ vehicle: name }, soon);
    if (name !== chosen.value) return;
    let points: Past[] = trail.points.map((t) => {
      const nuisances: Past["nuisances"] = {};
      for (const n of t.nuisances) nuisances[n.name] = [n.mean, n.sigma, n.unit];
      return { ms: millis(t.time!), at: { lon: t.mean!.lon!, lat: t.mean!.lat! }, located: t.status === Status.LOCATED, radius95M: t.radius95M, logEvidence: t.logEvidence, nuisances };
    });
    for (const p of past.value) points = withPoint(points, p);
    past.value = points;
  } catch (e) {
    if (name === chosen.value && !close.value) closeTrouble.value = sentence(e);
  }
}
