// Traffic past listening posts: who is on the road, how sure, and how many passed.
import { effect, signal } from "@preact/signals";
import { useEffect, useMemo } from "preact/hooks";
import { TrafficDoubtKind, type LineCount, type TrafficDoubt, type TrafficPicture } from "../../client/web/leadline/v1/traffic_pb.js";
import { beliefScale, css } from "./colour";
import { clockTimes, duration, figure, length, percent, some, utcTime } from "./format";
import { link, roads, roadsKnown } from "./live";
import { densest, intensityDecades, layRoad, paintTraffic, wayOf, type Laid } from "./painttraffic";
import { Plot } from "./plot";
import type { LonLat } from "./project";
import { address } from "./route";
import { clock, dark, units } from "./settings";
import { lookAt, stage } from "./stage";
import { flowS, followRoad, heard, leastExistence, parts, road, trafficTrouble } from "./traffic";
import { clockWords } from "./worry";

/** The vehicle that was looked up last. */
const marked = signal<bigint | undefined>(undefined);

const doubtWords: Record<TrafficDoubtKind, string> = {
  [TrafficDoubtKind.UNSPECIFIED]: "A doubt",
  [TrafficDoubtKind.AMBIGUOUS_SIDE]: "Two sides sound alike",
  [TrafficDoubtKind.IN_LINE]: "A post in line with the road",
  [TrafficDoubtKind.OUT_OF_REACH]: "A post out of reach",
  [TrafficDoubtKind.SILENT]: "A silent post",
  [TrafficDoubtKind.OVER_BUDGET]: "More vehicles than are followed",
  [TrafficDoubtKind.CROWDED]: "Too much at a time",
  [TrafficDoubtKind.UNKNOWN_POST]: "A post that is not this road's",
};

const compass = ["north", "north-east", "east", "south-east", "south", "south-west", "west", "north-west"];

/** Where forward leads, in a word. */
function forwardTo({ corners }: Laid): string {
  const [a, b] = [corners[0], corners[corners.length - 1]];
  return compass[Math.round((Math.atan2(b.e - a.e, b.n - a.n) / Math.PI) * 4 + 8) % 8];
}

const wayWords = { forward: "forward", backward: "backward", unknown: "either way" };

export function Traffic() {
  useEffect(() => {
    const stop = [
      effect(followRoad),
      effect(() => {
        const h = heard.value;
        const r = h && layRoad(road.peek(), h.shape);
        const m = marked.value;
        stage.value = {
          key: `traffic ${road.value} ${h?.drive}`,
          map: "",
          ground: r?.ground,
          label: `the traffic on ${road.value || "no road"}`,
          points: [],
          wait: !roadsKnown.value || roads.value.has(road.value) ? "The road is on its way." : "No road is heard here.",
          paint: (ctx, v, _, d) => r && paintTraffic(ctx, v, r, h!.picture, m, d),
          legend: h && <Legend p={h.picture} />,
        };
      }),
    ];
    return () => {
      stop.forEach((off) => off());
      stage.value = undefined;
    };
  }, []);
  const all = [...roads.value].sort(([a], [b]) => a.localeCompare(b));
  const denied = link.value.state === "denied" ? link.value.why : "";
  const [name, h] = [road.value, heard.value];
  return (
    <>
      {all.length > 1 && (
        <label class="inline">
          Road{" "}
          <select name="road" value={name} onChange={(e) => (location.hash = address("traffic", e.currentTarget.value))}>
            {!roads.value.has(name) && <option value={name}>{name || "choose one"}</option>}
            {all.map(([n, r]) => (
              <option key={n} value={n}>
                {n}
                {r.ended ? ", ended" : ""}
              </option>
            ))}
          </select>
        </label>
      )}
      {denied && !h && <p class="note bad">{denied}</p>}
      {trafficTrouble.value && (
        <p class="note bad" role="alert" id="traffic-trouble">
          {trafficTrouble.value}
          {h && ` What is shown is ${duration((clock.value - h.receivedAt) / 1000)} old.`}
        </p>
      )}
      {!h && !trafficTrouble.value && !denied && (
        <p class="empty">
          {!roadsKnown.value ? "Asking the server which roads it has." : roads.value.has(name) ? `What is heard on ${name} is on its way.` : name ? `There is no road ${name} here yet. It shows as soon as it is fed.` : "No road is heard here yet. It shows as soon as one is fed: a drive of bearings whose header says traffic, and names a suite that describes the road, by"}{" "}
          {roadsKnown.value && !name && <code>leadline feed DRIVE --to {location.host}</code>}
        </p>
      )}
      {h && <Picture p={h.picture} laid={layRoad(name, h.shape)} receivedAt={h.receivedAt} />}
    </>
  );
}

function Picture({ p, laid, receivedAt }: { p: TrafficPicture; laid: Laid; receivedAt: number }) {
  const since = (clock.value - receivedAt) / 1000;
  const ways = p.vehicles.map(wayOf);
  const count = (w: string) => ways.filter((x) => x === w).length;
  const n = p.vehicles.length;
  const unsure = count("unknown");
  return (
    <>
      <p class="lead" id="traffic-answer">
        {n === 0 ? "No vehicle is heard" : `${some(n, "vehicle")} on the road`}
        {n > 0 && `: ${count("forward")} forward, ${count("backward")} backward${unsure ? `, ${unsure} either way` : ""}`}. {figure(p.expected, 2)} expected, those that are less sure counted in.
      </p>
      {p.ended && <p class="note">The drive has ended: this is what was known last.</p>}
      {!p.ended && !trafficTrouble.value && since > 3 && <p class="note">No news of it for {duration(since)}.</p>}
      {p.time && clockWords(p.ageS, p.time) && <p class="note">{clockWords(p.ageS, p.time)}</p>}
      {p.doubts.map((d) => (
        <Doubt key={`${d.kind} ${d.post}`} d={d} />
      ))}
      <dl class="pairs">
        <dt>As of</dt>
        <dd>{p.time ? clockTimes(p.time) : "nothing heard yet"}</dd>
        <dt>Forward</dt>
        <dd>
          to the {forwardTo(laid)}, from the first corner on, {length(laid.shape.lengthM)}
        </dd>
        <dt>Bearings</dt>
        <dd>
          {String(p.accepted)} taken, {String(p.refused)} refused
        </dd>
        <dt>Followed by no label</dt>
        <dd>{figure(p.unlabelled, 2)} expected</dd>
      </dl>
      <Vehicles p={p} />
      <Lines p={p} />
      <Intensity p={p} laid={laid} />
      <Posts laid={laid} />
    </>
  );
}

function Doubt({ d }: { d: TrafficDoubt }) {
  return (
    <p class="note bad">
      {doubtWords[d.kind] ?? doubtWords[0]}
      {d.post && `, ${d.post}`}
      {d.count > 0n && ` (${some(d.count, "time")})`}: {d.detail}.
    </p>
  );
}

function Vehicles({ p }: { p: TrafficPicture }) {
  const nautical = units.value === "nautical";
  const per = nautical ? 3600 / 1852 : 3.6;
  return (
    <section aria-label="Vehicles">
      <table id="heard">
        <caption>Vehicles that are heard</caption>
        <thead>
          <tr>
            <th>No.</th>
            <th class="number">Along, m</th>
            <th class="number">Speed, {nautical ? "kn" : "km/h"}</th>
            <th>Way</th>
            <th class="number">Exists</th>
          </tr>
        </thead>
        <tbody>
          {p.vehicles.map((u) => (
            <tr key={String(u.label)}>
              <td>
                <button
                  type="button"
                  aria-label={`Show vehicle ${u.label} on the map`}
                  aria-pressed={marked.value === u.label}
                  onClick={() => {
                    marked.value = marked.value === u.label ? undefined : u.label;
                    if (marked.value !== undefined) lookAt.value = u.mean as LonLat;
                  }}
                >
                  {String(u.label)}
                </button>
              </td>
              <td class="number">
                {u.positionM.toFixed(1)} ± {figure(u.positionSigmaM, 2)}
              </td>
              <td class="number">
                {figure(Math.abs(u.speedMps) * per)} ± {figure(u.speedSigmaMps * per, 2)}
              </td>
              <td>{wayWords[wayOf(u)]}</td>
              <td class="number">{percent(u.existence)}</td>
            </tr>
          ))}
        </tbody>
      </table>
      <p class="hint">± is one sigma. A number is kept as long as its vehicle is heard; it names nobody.</p>
      <label class="inline">
        Show those that exist with at least{" "}
        <select name="least" value={leastExistence.value} onChange={(e) => (leastExistence.value = Number(e.currentTarget.value))}>
          {[0.1, 0.5, 0.9, 0.99].map((v) => (
            <option key={v} value={v}>
              {percent(v)}
            </option>
          ))}
        </select>
      </label>
    </section>
  );
}

const flows = [60, 300, 900, 3600, 86400];

function Lines({ p }: { p: TrafficPicture }) {
  if (p.lines.length === 0) return <p class="hint">The road's suite names no line past which vehicles are counted.</p>;
  const rate = (l: LineCount, v: number) => (l.flowS >= 60 ? figure(v) : "–");
  const recent = p.lines.flatMap((l) => l.recent.map((r) => ({ line: l.name, r }))).sort((a, b) => Number(b.r.time!.seconds - a.r.time!.seconds) || b.r.time!.nanos - a.r.time!.nanos);
  return (
    <section aria-label="Counts">
      <table id="lines">
        <caption>Passed a line</caption>
        <thead>
          <tr>
            <th>Line</th>
            <th class="number">Forward</th>
            <th class="number">an hour</th>
            <th class="number">Backward</th>
            <th class="number">an hour</th>
          </tr>
        </thead>
        <tbody>
          {p.lines.map((l) => (
            <tr key={l.name}>
              <td>
                {l.name}, at {length(l.atM)}
              </td>
              <td class="number">{String(l.forward)}</td>
              <td class="number">{rate(l, l.forwardPerHour)}</td>
              <td class="number">{String(l.backward)}</td>
              <td class="number">{rate(l, l.backwardPerHour)}</td>
            </tr>
          ))}
        </tbody>
      </table>
      <label class="inline">
        Flows over the last{" "}
        <select name="flow" value={flowS.value} onChange={(e) => (flowS.value = Number(e.currentTarget.value))}>
          {flows.map((s) => (
            <option key={s} value={s}>
              {duration(s)}
            </option>
          ))}
        </select>
      </label>
      <p class="hint">
        {p.lines[0].flowS < 60 ? "A flow shows once bearings span a minute." : `Taken over ${duration(p.lines[0].flowS)}.`} Counts are since the drive began.
      </p>
      {recent.length > 0 && (
        <table>
          <caption>Passed last</caption>
          <thead>
            <tr>
              <th>UTC</th>
              <th>Line</th>
              <th>No.</th>
              <th>Way</th>
            </tr>
          </thead>
          <tbody>
            {recent.slice(0, 10).map(({ line, r }) => (
              <tr key={`${line} ${r.label} ${r.time!.seconds}`}>
                <td>{utcTime(r.time!).slice(11)}</td>
                <td>{line}</td>
                <td>{String(r.label)}</td>
                <td>{r.forward ? "forward" : "backward"}</td>
              </tr>
            ))}
          </tbody>
        </table>
      )}
    </section>
  );
}

function Intensity({ p, laid }: { p: TrafficPicture; laid: Laid }) {
  const n = p.intensityPerKm.length;
  const along = useMemo(() => Array.from({ length: n }, (_, i) => ((i + 0.5) * laid.shape.lengthM) / parts), [n, laid]);
  if (n === 0) return null;
  const most = Math.max(...p.intensityPerKm);
  const at = along[p.intensityPerKm.indexOf(most)];
  return (
    <Plot
      title="Intensity along the road"
      unit="vehicles a km"
      over="the road"
      times={along}
      says={`at most ${figure(most)}, ${length(at)} along`}
      lines={[{ label: "expected vehicles a kilometre", values: p.intensityPerKm, colour: "first" }]}
    />
  );
}

function Posts({ laid }: { laid: Laid }) {
  return (
    <details>
      <summary>
        {laid.shape.posts.length} post{laid.shape.posts.length === 1 ? "" : "s"} listen{laid.shape.posts.length === 1 ? "s" : ""}
      </summary>
      <table>
        <thead>
          <tr>
            <th>Post</th>
            <th>Where</th>
            <th class="number">Hears nothing from</th>
          </tr>
        </thead>
        <tbody>
          {laid.shape.posts.map((q) => (
            <tr key={q.post}>
              <td>{q.post}</td>
              <td>
                {q.at!.lat!.toFixed(5)}, {q.at!.lon!.toFixed(5)}
                {q.axisDeg !== undefined && <small>, microphones along {figure(q.axisDeg)}°</small>}
              </td>
              <td class="number">{length(q.reachM)}</td>
            </tr>
          ))}
        </tbody>
      </table>
    </details>
  );
}

function Legend({ p }: { p: TrafficPicture }) {
  const most = densest(p);
  return (
    <div>
      <div class="ramp" style={{ background: `linear-gradient(to right, ${beliefScale(dark.value).map((c) => css(c)).join(",")})` }} />
      <div class="ends">
        <span>{figure(most / 10 ** intensityDecades, 2)}</span>
        <span>{figure(most, 2)}</span>
      </div>
      <div>expected vehicles a km</div>
      <ul>
        <li><i class="sign arrow" /> vehicle and its number</li>
        <li><i class="sign whisker" /> ± two sigma</li>
        <li><i class="sign post" /> listening post</li>
        {p.lines.length > 0 && <li><i class="sign line" /> counted line</li>}
      </ul>
    </div>
  );
}
