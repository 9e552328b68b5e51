// How probable it is that the vehicle is somewhere, and how far off it may be at a
// chosen risk; and what somebody says of it.
import { toJson } from "@bufbuild/protobuf";
import { effect, signal } from "@preact/signals";
import { useEffect } from "preact/hooks";
import { PosteriorSchema, type Posterior } from "../../client/web/leadline/v1/posterior_pb.js";
import { calls, sentence, soon } from "./api";
import { Copy, shellWord } from "./copying";
import { figure, length, percent, place, readPlace, type CoordinateForm } from "./format";
import { ground } from "./ground";
import { chosen, chosenKnown, close as latest, nobody } from "./live";
import { circle } from "./paintall";
import { find, middle, named, places } from "./places";
import { asksFor, close, closed, corners, forgetArea, spot, spotRadiusM, tool } from "./pointing";
import type { LonLat } from "./project";
import { who } from "./settings";
import { lookAt } from "./stage";

const risk = signal(""); // as chosen; empty is the suite's
const form = signal<CoordinateForm>("decimal");

type Answer = { posterior?: Posterior; inside?: number; trouble: string; /** What it is of. */ of?: string };
const answer = signal<Answer>({ trouble: "" });

/** The area that is asked about, as a ring. */
function asked(): LonLat[] | undefined {
  if (closed.value) return corners.value;
  const p = latest.value?.posterior;
  const g = p && ground(p.map).value;
  if (!spot.value || !g) return undefined;
  const at = g.frame.forward(spot.value);
  return circle(spotRadiusM.value).map((c) => g.frame.inverse({ e: at.e + c.e, n: at.n + c.n }));
}

/** What an answer is of: a vehicle and an area. */
const question = (ring: LonLat[] | undefined) => JSON.stringify([chosen.value, ring]);

let asking = false;
let again = false;

/** Asks once the answer before is there: news push it on. */
async function ask() {
  if (asking) {
    again = true;
    return;
  }
  asking = true;
  const [vehicle, ring, chosenRisk] = [chosen.peek(), asked(), Number(risk.peek())];
  const of = question(ring);
  try {
    const { answers } = await calls.where(
      {
        vehicles: [vehicle],
        ...(ring && { area: { rings: [{ points: ring }] } }),
        ...(risk.peek() && { integrityRisk: chosenRisk }),
      },
      soon,
    );
    const a = answers[0];
    answer.value = { posterior: a.posterior, inside: a.posterior?.areaProbability, trouble: a.failure?.message ?? "", of };
  } catch (e) {
    answer.value = { trouble: sentence(e), of };
  }
  await new Promise((resolve) => setTimeout(resolve, 300));
  asking = false;
  if (again) {
    again = false;
    void ask();
  }
}

export function Chances() {
  useEffect(
    () =>
      effect(() => {
        void [latest.value, spot.value, spotRadiusM.value, closed.value, corners.value, risk.value];
        if (chosen.value && latest.value) void ask();
      }),
    [],
  );
  const p = latest.value?.posterior ?? chosenKnown.value?.posterior;
  if (!chosen.value) return <p class="empty">Choose a vehicle in the list: its chances show here.</p>;
  if (!p) return <p class="empty">{nobody()}</p>;
  return (
    <>
      <Inside p={p} />
      <Risk p={p} />
      <Coordinates p={p} />
      <Say p={p} />
    </>
  );
}

function Inside({ p }: { p: Posterior }) {
  const text = signal(spot.value ? place(spot.value, "decimal") : "");
  const a = answer.value;
  const ring = asked();
  const trouble = signal("");
  return (
    <section aria-labelledby="inside">
      <h3 id="inside">Is it there?</h3>
      <div class="choices" role="group" aria-label="What to point at">
        <button aria-pressed={tool.value === "place"} onClick={() => (tool.value = tool.value === "place" ? "none" : "place")}>
          Point at a place
        </button>
        <button
          aria-pressed={tool.value === "area"}
          onClick={() => {
            forgetArea();
            tool.value = tool.value === "area" ? "none" : "area";
          }}
        >
          Draw an area
        </button>
        {tool.value === "area" && !closed.value && (
          <button onClick={close} disabled={corners.value.length < 3}>
            Close the area
          </button>
        )}
        {(spot.value || corners.value.length > 0) && (
          <button
            onClick={() => {
              forgetArea();
              spot.value = undefined;
            }}
          >
            Forget it
          </button>
        )}
      </div>
      {tool.value === "place" && <p class="hint">Click on the map; or go to it by keyboard, move it until the cross is at the place, and press space.</p>}
      {tool.value === "area" && <p class="hint">Click on the corners, or press space at each with the map under the cross; then close the area, or press Enter.</p>}
      <form
        class="inline"
        onSubmit={(e) => {
          e.preventDefault();
          const data = new FormData(e.currentTarget);
          const q = readPlace(data.get("place") as string);
          const known = q ? undefined : find(data.get("place") as string);
          if (!q && !known) {
            document.getElementById("place-trouble")!.textContent = `That is no place: type latitude, longitude, such as 45.00006, -30.0, or 45° 00.004′ N 030° 00.000′ W${places.value ? `, or the name of one of the places of ${places.value.file}` : ""}.`;
            return;
          }
          document.getElementById("place-trouble")!.textContent = "";
          forgetArea();
          spot.value = undefined;
          if (known?.areas.length) {
            corners.value = known.areas[0][0].slice(1);
            closed.value = true;
          } else spot.value = q ?? middle(known!);
          asksFor.value = known?.name ?? "";
          lookAt.value = q ?? middle(known!);
        }}
      >
        <label>
          Place <input name="place" defaultValue={text.value} key={text.value} placeholder={named.value.length ? "name, or latitude, longitude" : "latitude, longitude"} aria-describedby="place-trouble" list="places" autocomplete="off" size={24} />
        </label>
        <button>Ask</button>
        <datalist id="places">
          {[...new Set(named.value.map((p) => p.name))].map((n) => (
            <option key={n} value={n} />
          ))}
        </datalist>
        <span id="place-trouble" role="alert" class="bad">{trouble.value}</span>
      </form>
      {!closed.value && (
        <label>
          within{" "}
          <input type="number" min="0.1" max="1000000" step="any" value={spotRadiusM.value} onInput={(e) => e.currentTarget.valueAsNumber > 0 && (spotRadiusM.value = e.currentTarget.valueAsNumber)} /> m of it
        </label>
      )}
      <p class="answer" role="status" id="inside-answer">
        {ring && a.of === question(ring) && a.inside !== undefined ? (
          <>
            <b>{percent(a.inside)}</b> {closed.value ? `inside ${asksFor.value || "the area"}` : `within ${length(spotRadiusM.value)} of ${asksFor.value || "the place"}`}
          </>
        ) : ring ? (
          a.trouble || "Asking."
        ) : (
          "Point at a place, type one, or draw an area."
        )}
      </p>
    </section>
  );
}

function Risk({ p }: { p: Posterior }) {
  const a = answer.value;
  const protection = (a.posterior?.vehicle === p.vehicle && a.posterior.protection) || p.protection;
  return (
    <section aria-labelledby="risk">
      <h3 id="risk">How far off may it be?</h3>
      <label>
        Accepted risk{" "}
        <select value={risk.value} onChange={(e) => (risk.value = e.currentTarget.value)}>
          <option value="">the suite's{p.protection ? ` (${figure(p.protection.risk)})` : ""}</option>
          {["0.01", "0.001", "0.0001", "0.00001", "0.0000001"].map((r) => (
            <option key={r} value={r}>
              {r.replace("0.0000001", "1 in 10 million").replace("0.00001", "1 in 100 000").replace("0.0001", "1 in 10 000").replace("0.001", "1 in 1000").replace("0.01", "1 in 100")}
            </option>
          ))}
        </select>
      </label>
      <p class="answer" role="status" id="protection-answer">
        {protection?.radiusM !== undefined ? (
          <>
            Not beyond <b>{length(protection.radiusM)}</b> of the mean, but for a risk of {figure(protection.risk)}, given the belief
          </>
        ) : (
          <>Unbounded: {protection?.unboundedReason || "not told"}</>
        )}
      </p>
      {a.trouble && <p class="note bad">{a.trouble}</p>}
    </section>
  );
}

const forms: [CoordinateForm, string][] = [
  ["decimal", "decimal degrees"],
  ["minutes", "degrees and minutes"],
  ["utm", "UTM"],
];

function Coordinates({ p }: { p: Posterior }) {
  const mean = p.mean as LonLat;
  const json = (q: Posterior) => JSON.stringify(toJson(PosteriorSchema, q), null, 2);
  return (
    <section aria-labelledby="coordinates">
      <h3 id="coordinates">Where is the mean?</h3>
      <p class="answer" id="coordinates-answer">
        <b>{place(mean, form.value)}</b>
      </p>
      <div class="choices" role="group" aria-label="Form of coordinates">
        {forms.map(([f, words]) => (
          <button key={f} aria-pressed={form.value === f} onClick={() => (form.value = f)}>
            {words}
          </button>
        ))}
      </div>
      <div class="choices" role="group" aria-label="Copy">
        <Copy words="Copy coordinates" text={() => place(mean, form.value)} />
        <Copy words="Copy as JSON" text={() => json(newest(p))} />
        <Copy words="Copy as GeoJSON" text={() => geoJSON(newest(p))} />
        <Copy words="Copy the command" text={() => command(p)} />
      </div>
    </section>
  );
}

/** The answer's posterior, unless it is older than the one that is shown, or another vehicle's. */
function newest(p: Posterior): Posterior {
  const a = answer.value.posterior;
  return a?.vehicle === p.vehicle && (a.counts?.accepted ?? 0n) >= (p.counts?.accepted ?? 0n) ? a : p;
}

/** The mean, the places and the area that was asked about, as features. */
function geoJSON(p: Posterior): string {
  const point = (q: LonLat) => ({ type: "Point", coordinates: [q.lon, q.lat] });
  const feature = (geometry: object, properties: object) => ({ type: "Feature", geometry, properties });
  const ring = asked();
  return JSON.stringify(
    {
      type: "FeatureCollection",
      features: [
        feature(point(p.mean as LonLat), { what: "mean", vehicle: p.vehicle, time: new Date(Number(p.time!.seconds) * 1000 + p.time!.nanos / 1e6).toISOString(), radius95_m: p.radii?.radius95M }),
        ...p.modes.map((m) => feature(point(m.mean as LonLat), { what: "place", vehicle: p.vehicle, probability: m.mass, road: m.edges[0]?.name })),
        ...(ring ? [feature({ type: "Polygon", coordinates: [[...ring, ring[0]].map((q) => [q.lon, q.lat])] }, { what: "asked area", probability: answer.value.of === question(ring) ? answer.value.inside : undefined })] : []),
      ],
    },
    null,
    2,
  );
}

function command(p: Posterior): string {
  const words = ["leadline", "where", p.vehicle, "--at", location.host, ...(risk.value ? ["--risk", risk.value] : []), "--json"];
  return words.map(shellWord).join(" ");
}

const entered = signal("");

function Say({ p }: { p: Posterior }) {
  const g = ground(p.map).value;
  const names = [...new Set(g?.whole.lines.map((l) => l.name).filter((n) => n) ?? [])].sort();
  const area = closed.value;
  return (
    <section aria-labelledby="say">
      <h3 id="say">Somebody has seen it</h3>
      <form
        onSubmit={async (e) => {
          e.preventDefault();
          const data = new FormData(e.currentTarget);
          const road = (data.get("road") as string).trim();
          who.value = (data.get("who") as string).trim();
          if (!road && !area) {
            entered.value = "Name a road, or draw an area on the map first.";
            return;
          }
          entered.value = "Entering it.";
          try {
            const r = await calls.addSighting(
              {
                vehicle: p.vehicle,
                drive: chosenKnown.peek()?.drive ?? "",
                sighting: {
                  place: road ? { case: "road", value: road } : { case: "area", value: { rings: [{ points: corners.value }] } },
                  mistaken: Number(data.get("mistaken")) / 100,
                  who: who.value,
                },
              },
              soon,
            );
            const [before, after] = [r.before?.radii?.radius95M ?? NaN, r.after?.radii?.radius95M ?? NaN];
            entered.value = r.refusal ? `Refused: ${r.refusal.detail}` : `Entered. The 95 % radius was ${length(before)} and is ${length(after)}.`;
          } catch (e) {
            entered.value = sentence(e);
          }
        }}
      >
        {names.length > 0 && (
          <label>
            On the road <input name="road" list="roads" size={24} />
          </label>
        )}
        {names.length === 0 && <input type="hidden" name="road" value="" />}
        <datalist id="roads">
          {names.slice(0, 5000).map((n) => (
            <option key={n} value={n} />
          ))}
        </datalist>
        <p class="hint">{area ? "Without a road, the area that is drawn counts." : "Or draw an area above, and name no road."}</p>
        <label>
          May be mistaken, % <input name="mistaken" type="number" min="0" max="100" step="any" defaultValue="10" required />
        </label>
        <label>
          Who says so <input name="who" maxLength={80} defaultValue={who.value} required size={18} />
        </label>
        <button>Enter the sighting</button>
        <p role="status" id="sighting-answer">
          {entered.value}
        </p>
      </form>
    </section>
  );
}
