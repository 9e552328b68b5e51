// The maps and suites that the server has.
import { signal } from "@preact/signals";
import { useEffect } from "preact/hooks";
import { MapKind, type MapDescription } from "../../client/web/leadline/v1/map_pb.js";
import { calls, sentence, soon } from "./api";
import { Copy, shellWord } from "./copying";
import { Drives } from "./drives";
import { figure, some } from "./format";
import { link } from "./live";
import { Upload } from "./upload";

const maps = signal<MapDescription[] | undefined>(undefined);
const suites = signal<string[] | undefined>(undefined);
const trouble = signal("");
const checks = signal<Record<string, string>>({});
const texts = signal<Record<string, string>>({});

async function load() {
  try {
    const [m, s] = await Promise.all([calls.listMaps({}, soon), calls.listSuites({}, soon)]);
    maps.value = m.maps;
    suites.value = s.suites;
    trouble.value = "";
  } catch (e) {
    trouble.value = sentence(e);
  }
}

async function check(name: string) {
  checks.value = { ...checks.value, [name]: "Checking; a large map takes some seconds." };
  try {
    const r = await calls.describeMap({ map: name, check: true }, { timeoutMs: 120_000 });
    checks.value = { ...checks.value, [name]: r.check };
  } catch (e) {
    checks.value = { ...checks.value, [name]: sentence(e) };
  }
}

async function open(name: string) {
  if (texts.value[name]) return;
  try {
    const r = await calls.describeSuite({ suite: name }, soon);
    texts.value = { ...texts.value, [name]: r.yaml };
  } catch (e) {
    texts.value = { ...texts.value, [name]: sentence(e) };
  }
}

function Facts({ m }: { m: MapDescription }) {
  const roads = m.kind === MapKind.ROADS;
  const rows: [string, string][] = [
    ["What", roads ? `roads: ${some(m.edges, "directed edge")}, ${figure(m.lengthM / 1000)} km` : m.columns ? `heights: ${m.columns} × ${m.rows}, ${figure(m.spacingM)} m apart` : "an open plane, without heights"],
    ["Fingerprint", m.fingerprint],
    ["Source", m.source || "not stated"],
    ["Licence", m.licence || "not stated"],
    ...(m.verticalDatum ? ([["Heights", `above ${m.verticalDatum}, sigma ${m.heightSigmaM ? figure(m.heightSigmaM) + " m" : "not stated"}`]] as [string, string][]) : []),
    ["Within", `${m.southWest!.lat!.toFixed(5)}, ${m.southWest!.lon!.toFixed(5)} to ${m.northEast!.lat!.toFixed(5)}, ${m.northEast!.lon!.toFixed(5)}`],
    ["Frame", m.frame],
    ["In use", `${some(m.sessions, "drive")}${m.olderSessions ? `, ${m.olderSessions} on an older one` : ""}`],
  ];
  return (
    <dl class="pairs">
      {rows.map(([k, v]) => (
        <>
          <dt>{k}</dt>
          <dd>{v}</dd>
        </>
      ))}
    </dl>
  );
}

export function Maps() {
  useEffect(() => void load(), [link.value.state]);
  const command = () => ["leadline", "map", "send", "MAP.roads.arrow", "--at", location.host].map(shellWord).join(" ");
  return (
    <section class="page" aria-label="At the server: drives, maps and suites">
      <Drives />
      <h2>Maps</h2>
      {trouble.value && <p class="note bad">{trouble.value}</p>}
      {!maps.value && !trouble.value && <p class="empty">Asking the server for its maps.</p>}
      {maps.value?.length === 0 && <p class="empty">The server has no map yet.</p>}
      <div class="cards">
        {maps.value?.map((m) => (
          <article key={m.name}>
            <h3>{m.name}</h3>
            <Facts m={m} />
            <button onClick={() => void check(m.name)} aria-label={`Check it: the map ${m.name}`}>
              Check it
            </button>
            {checks.value[m.name] && (
              <pre tabIndex={0} role="region" aria-label={`What the check of ${m.name} says`} aria-live="polite">
                {checks.value[m.name]}
              </pre>
            )}
          </article>
        ))}
      </div>
      <Upload maps={maps.value ?? []} uploaded={() => void load()} />
      <p>
        By command: <code>{command()}</code> <Copy words="Copy the command" text={command} />
      </p>
      <h2>Suites</h2>
      {suites.value?.length === 0 && <p class="empty">The server has no suite.</p>}
      {suites.value?.map((s) => (
        <details key={s} onToggle={(e) => e.currentTarget.open && void open(s)}>
          <summary>{s}</summary>
          <pre tabIndex={0} role="region" aria-label={`Suite ${s}`}>{texts.value[s] ?? "Asking the server."}</pre>
        </details>
      ))}
      <p>
        <a href="licences.txt">Libraries in this page, and their licences</a>
      </p>
    </section>
  );
}
