// Who must be called next, and why, in words.
import { AlarmKind, Status, type Alarm, type Posterior } from "../../client/web/leadline/v1/posterior_pb.js";
import { duration, length, percent, utcTime, type Stamp } from "./format";

/** What the page knows of a vehicle. */
export type Known = {
  vehicle: string;
  drive: string;
  posterior: Posterior;
  /** By the page's clock, ms. */
  receivedAt: number;
  /** Why there will be no more news; empty if there may be. */
  over: string;
  /** Whether news came one after another while it was followed. */
  moves: boolean;
};

export const statusWords: Record<Status, string> = {
  [Status.UNSPECIFIED]: "no position yet",
  [Status.CONTRADICTED]: "contradicted",
  [Status.OFF_MAP]: "off map",
  [Status.LOCATED]: "located",
  [Status.AMBIGUOUS]: "ambiguous",
  [Status.UNSURE]: "unsure",
};

/** From how long on a vehicle counts as silent, s. */
export const silentFrom = 15;

/** For how long nothing has come of a vehicle, s. */
export function silence(k: Known, now: number): number {
  const since = (now - k.receivedAt) / 1000;
  // A drive that is replayed has a clock of its own, which says nothing; nor does that of
  // one whose news comes, however old it is.
  const old = k.posterior.ageS;
  return old >= 0 && !otherDay(old) && !k.moves ? old + since : since;
}

/** Whether news of it comes, and is old when it comes. */
const late = (k: Known) => k.moves && k.posterior.ageS > silentFrom && !otherDay(k.posterior.ageS);

/**
 * Whether the radii say where the vehicle is: they are of one that is not lost, and
 * of one that is lost with more than what a 95 % radius leaves out they hold less.
 */
export const radiiHold = (p: Posterior) => !p.lostAlarm && p.lost <= 0.05;

/** The 95 % radius, m; that of a vehicle that may be lost has no bound. */
export const radius95 = (p: Posterior) => (radiiHold(p) ? (p.radii?.radius95M ?? Infinity) : Infinity);

/** The same as a multiple of the alert limit. */
export const ratio = (p: Posterior) => radius95(p) / (p.alertLimitM || 25);

/** Greater is worse: first by what is wrong, then by how far beyond the limit. */
export function worry(k: Known, now: number): number {
  const p = k.posterior;
  const grade = (() => {
    if (k.over) return 0;
    if (p.lostAlarm) return 6;
    if (p.status === Status.CONTRADICTED) return 5;
    if (p.status === Status.OFF_MAP) return 4;
    if (silence(k, now) > silentFrom || late(k)) return 3;
    if (p.status !== Status.LOCATED) return 2;
    return 1;
  })();
  return grade * 1000 + Math.min(999, 120 + 40 * Math.log2(Math.max(ratio(p), 1 / 8)));
}

/** What an alarm is about, in words. */
export function alarmWords(a: Alarm | undefined, lost = false): string {
  if (lost || !a) return "Lost: neither the map nor the vehicle's motion says where it is";
  const what = a.sensor ? `${a.sensor}${a.post ? ` at ${a.post}` : ""}` : "All sensors together";
  switch (a.kind) {
    case AlarmKind.SPREAD:
      return `${what}: errors are larger than stated`;
    case AlarmKind.BIAS:
      return `${what}: errors lie to one side`;
    case AlarmKind.IMPOSSIBLE:
      return `${what}: a measurement was impossible everywhere`;
    case AlarmKind.ISOLATED:
      return `${what}: disagrees with all others, and is not used`;
  }
  return `${what}: alarm`;
}

const roadName = (name: string) => name || "an unnamed road";
const numerals = ["no", "one", "two", "three", "four", "five", "six", "seven", "eight"];
const numeral = (n: number) => numerals[n] ?? String(n);

/** The roads that hold a share of a mode, the greatest first. */
export function roads(p: Posterior): [string, number][] {
  const by = new Map<string, number>();
  for (const m of p.modes) {
    const name = m.edges.length ? m.edges[0].name : "";
    by.set(name, (by.get(name) ?? 0) + m.mass);
  }
  return [...by].sort((a, b) => b[1] - a[1]);
}

/** Whether the map is made of roads. */
export const onRoads = (p: Posterior) => p.edgeCount > 0;

/** Where a vehicle may be, in a sentence. */
export function whereabouts(p: Posterior): string {
  const limit = length(p.radii?.radius95M ?? Infinity);
  if (p.lostAlarm && p.lost >= 0.5) return `Lost, at ${percent(p.lost)}: neither the map nor its own motion says where it is.`;
  if (p.lostAlarm) return `It was lost, and has not been located since; that it still is, is ${percent(p.lost)} probable.`;
  if (p.status === Status.OFF_MAP) return `Off the map, most probably (${percent(p.offMap)}).`;
  const tell = (all: [string, number][]) => all.slice(0, 3).map(([name, mass]) => `${roadName(name)} ${percent(mass)}`).join(", ");
  if (p.status === Status.LOCATED) {
    const on = onRoads(p) ? `On ${roadName(p.mostProbable?.name ?? "")}` : "In one place";
    return `${on}, within ${limit}.`;
  }
  let text: string;
  const likely = p.modes.filter((m) => m.mass >= 0.01);
  const others = p.modeRest >= 0.2; // more than a list can tell
  if (onRoads(p)) {
    const by = roads(p).filter(([, mass]) => mass >= 0.01);
    if (others) text = `Spread over ${p.modeCount} places, most probably ${tell(by)}.`;
    else if (by.length > 1) text = `On one of ${numeral(by.length)} roads: ${tell(by)}.`;
    else if (likely.length > 1) text = `At one of ${numeral(likely.length)} places on ${roadName(by[0][0])}.`;
    else text = `On ${roadName(by[0]?.[0] ?? "")}, within ${limit}.`;
  } else if (others) text = `Spread over ${p.modeCount} places, the likeliest ${percent(likely[0]?.mass ?? 0)}.`;
  else if (likely.length > 1) text = `In one of ${numeral(likely.length)} places: ${likely.slice(0, 3).map((m) => percent(m.mass)).join(", ")}.`;
  else text = `In one place, within ${limit}.`;
  if (p.status === Status.CONTRADICTED) text = `${p.alarms.length ? alarmWords(p.alarms[0]) : "The measurements do not fit"}. If they did: ${text.charAt(0).toLowerCase()}${text.slice(1)}`;
  return text;
}

/** That nothing has come of a vehicle for long; empty if something has. */
export function silenceWords(k: Known, now: number): string {
  const quiet = silence(k, now);
  return !k.over && quiet > silentFrom ? `Silent for ${duration(quiet)}.` : "";
}

/** Whether what is so old, s, is of another day: a recording, or by a clock that is wrong. */
export const otherDay = (ageS: number) => Math.abs(ageS) >= 86400;

/** What is to be said of a clock by which something is so old, s; empty if nothing is. */
export function clockWords(ageS: number, time: Stamp): string {
  if (otherDay(ageS)) return `Its times are of ${utcTime(time).slice(0, 10)}: a recording, or a clock that is wrong.`;
  return ageS < -5 ? `Its clock is ${duration(ageS)} ahead of the server's.` : "";
}

/** What else is to be said of a vehicle. */
export function remarks(k: Known): string {
  if (k.over) return k.over;
  const out: string[] = [];
  if (!k.posterior.lostAlarm && !radiiHold(k.posterior)) out.push(`That it is lost is ${percent(k.posterior.lost)} probable.`);
  const p = k.posterior;
  const clock = otherDay(p.ageS) ? `Its times are of ${utcTime(p.time!).slice(0, 10).replaceAll("-", "\u2011")}.` : clockWords(p.ageS, p.time!);
  if (clock) out.push(clock);
  if (late(k)) out.push(`Its news is ${duration(p.ageS)} old when it comes: it is delayed, or its clock is behind the server's.`);
  return out.join(" ");
}
