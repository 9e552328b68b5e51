// What is known of the chosen vehicle beside the map: figures over time, and what
// was measured last.
import { useMemo } from "preact/hooks";
import { useSignal } from "@preact/signals";
import { Ended, EndButton } from "./ending";
import { clockTimes, duration, figure, length, percent, speed, utcTime } from "./format";
import { chosen, chosenKnown, close, closeTrouble, nobody, past } from "./live";
import { measured, nuisanceName } from "./measured";
import { Plot } from "./plot";
import { clock } from "./settings";
import { alarmWords, clockWords, onRoads, radiiHold, whereabouts } from "./worry";

export function Figures() {
  const [c, k] = [close.value, chosenKnown.value];
  const p = c?.posterior ?? k?.posterior;
  if (!chosen.value) return <p class="empty">Choose a vehicle in the list: its figures show here.</p>;
  if (!p) return <p class="empty">{nobody()}</p>;
  const age = c ? (clock.value - c.receivedAt) / 1000 : 0;
  return (
    <>
      <p class="lead">{whereabouts(p)}</p>
      {k?.over && <p class="note">{k.over}</p>}
      {closeTrouble.value && <p class="note bad">{closeTrouble.value} What is shown is {duration(age)} old.</p>}
      {!closeTrouble.value && !k?.over && age > 3 && <p class="note">No news of it for {duration(age)}.</p>}
      {clockWords(p.ageS, p.time!) && <p class="note">{clockWords(p.ageS, p.time!)}</p>}
      {p.alarms.map((a) => (
        <p key={`${a.kind}${a.sensor}${a.post}`} class="note bad">
          Alarm: {alarmWords(a)}.
        </p>
      ))}
      <dl class="pairs">
        <dt>As of</dt>
        <dd>{clockTimes(p.time!)}</dd>
        <dt>{radiiHold(p) ? "Within, at 50, 95, 99\u00a0%" : "If it is not lost, at 50, 95, 99\u00a0%"}</dt>
        <dd>
          {length(p.radii!.radius50M)}, {length(p.radii!.radius95M)}, {length(p.radii!.radius99M)}
        </dd>
        <dt>Alert limit</dt>
        <dd>{length(p.alertLimitM)}</dd>
        {p.heading && p.heading.sigmaDeg < 90 && (
          <>
            <dt>Heading</dt>
            <dd>
              {figure(p.heading.deg)}° ± {figure(p.heading.sigmaDeg)}°
            </dd>
          </>
        )}
        {p.speed && (
          <>
            <dt>Speed</dt>
            <dd>
              {speed(p.speed.mps)} ± {speed(p.speed.sigmaMps)}
            </dd>
          </>
        )}
        <dt>Measurements</dt>
        <dd>
          {String(p.counts?.accepted ?? 0)} taken, {String(p.counts?.refused ?? 0)} refused
        </dd>
      </dl>
      <Places />
      <History />
      <Last />
      <div class="choices">{k && !k.over && <EndButton vehicle={k.vehicle} drive={k.drive} />}</div>
      <Ended />
    </>
  );
}

/** The places where the vehicle may be: what the map's discs are, for all. */
function Places() {
  const p = close.value?.posterior;
  if (!p || p.modes.length < 2) return null;
  const listed = p.modes.filter((m) => m.mass >= 0.001);
  return (
    <table>
      <caption>Places it may be</caption>
      <thead>
        <tr>
          <th>No.</th>
          <th>{onRoads(p) ? "Road" : "Place"}</th>
          <th class="number">Probability</th>
        </tr>
      </thead>
      <tbody>
        {listed.map((m, i) => (
          <tr key={i}>
            <td>{i + 1}</td>
            <td>{onRoads(p) ? m.edges[0]?.name || "unnamed road" : `${m.mean!.lat!.toFixed(5)}, ${m.mean!.lon!.toFixed(5)}`}</td>
            <td class="number">{percent(m.mass)}</td>
          </tr>
        ))}
        {p.modeCount > listed.length && (
          <tr>
            <td />
            <td>{p.modeCount - listed.length} less likely</td>
            <td class="number">{percent(1 - listed.reduce((sum, m) => sum + m.mass, 0))}</td>
          </tr>
        )}
      </tbody>
    </table>
  );
}

function History() {
  const points = past.value;
  const wanted = useSignal("");
  const limit = close.value?.posterior.alertLimitM ?? 0;
  const names = [...new Set(points.flatMap((q) => Object.keys(q.nuisances)))];
  const name = names.includes(wanted.value) ? wanted.value : names[0];
  const times = useMemo(() => points.map((q) => q.ms / 1000), [points]);
  if (points.length < 2) return <p class="empty">Figures over time show once there are two posteriors.</p>;
  const last = points[points.length - 1];
  const nuisance = points.map((q) => q.nuisances[name]);
  const unit = nuisance.find((v) => v)?.[2] ?? "";
  return (
    <>
      <Plot
        title="95 % radius"
        unit="m"
        log
        times={times}
        says={`now ${figure(last.radius95M)}, alert limit ${figure(limit)}`}
        lines={[
          { label: "95 % radius", values: points.map((q) => Math.max(q.radius95M, 0.01)), colour: "first" },
          { label: "alert limit", values: points.map(() => limit), colour: "second", dash: [6, 4] },
        ]}
      />
      <p class="key"><i class="line first" /> 95 % radius <i class="line second" /> alert limit</p>
      <Plot
        title="Evidence, summed"
        unit="nats"
        times={times}
        says={`now ${figure(last.logEvidence)}`}
        lines={[{ label: "log evidence", values: points.map((q) => (Number.isFinite(q.logEvidence) ? q.logEvidence : null)), colour: "first" }]}
      />
      {name && (
        <>
          <Plot
            title={`Estimated: ${nuisanceName(name)}`}
            unit={unit || "ratio"}
            times={times}
            band
            says={`now ${figure(nuisance[nuisance.length - 1]?.[0] ?? NaN)}, sigma ${figure(nuisance[nuisance.length - 1]?.[1] ?? NaN)}`}
            lines={[
              { label: name, values: nuisance.map((v) => v?.[0] ?? null), colour: "first" },
              { label: "minus sigma", values: nuisance.map((v) => (v ? v[0] - v[1] : null)), colour: "quiet" },
              { label: "plus sigma", values: nuisance.map((v) => (v ? v[0] + v[1] : null)), colour: "quiet" },
            ]}
          />
          <p class="key"><i class="line first" /> mean <i class="line quiet" /> one sigma either side</p>
          {names.length > 1 && (
            <label class="inline">
              Estimated along the way{" "}
              <select value={name} onChange={(e) => (wanted.value = e.currentTarget.value)}>
                {names.map((n) => (
                  <option key={n} value={n}>
                    {nuisanceName(n)}
                  </option>
                ))}
              </select>
            </label>
          )}
        </>
      )}
    </>
  );
}

function Last() {
  const c = close.value;
  if (!c || c.recent.length === 0) return null;
  const evidence = new Map(c.posterior.evidence.map((e) => [`${e.sensor} ${e.number}`, e]));
  return (
    <table class="last">
      <caption>Last measurements</caption>
      <thead>
        <tr>
          <th>UTC</th>
          <th>Sensor</th>
          <th>What</th>
        </tr>
      </thead>
      <tbody>
        {[...c.recent].reverse().map((r) => {
          const m = r.measurement!;
          const kind = m.measurement?.kind.case ?? "";
          const sensor = m.sensor || kind.replace(/[A-Z]/g, (x) => "_" + x.toLowerCase());
          const e = evidence.get(`${sensor} ${m.number}`);
          return (
            <tr key={`${sensor} ${m.time?.seconds} ${m.time?.nanos} ${m.number}`} class={r.refusal ? "refused" : ""}>
              <td>{m.time ? utcTime(m.time).slice(11) : "–"}</td>
              <td>{sensor}</td>
              <td>
                {measured(m.measurement)}
                {e && <small> evidence {figure(e.logEvidence)} nats{e.withheld ? ", not used: its sensor is isolated" : ""}</small>}
                {r.refusal && <strong> Refused: {r.refusal.detail}</strong>}
              </td>
            </tr>
          );
        })}
      </tbody>
    </table>
  );
}
