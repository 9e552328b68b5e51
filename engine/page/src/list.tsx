// The worry list: one row a vehicle, the worst first.
import { useComputed } from "@preact/signals";
import { length, some } from "./format";
import { chosen, fleet, holdOrder, link, order } from "./live";
import { address, shown } from "./route";
import { clock } from "./settings";
import { otherDay, radiiHold, ratio, remarks, silenceWords, statusWords, whereabouts, worry, type Known } from "./worry";

/** Where a multiple of the alert limit lies on the ruler, 0 to 1; the limit itself is in the middle. */
export const along = (of: number) => Math.min(0.99, Math.max(0.01, 0.5 + Math.log2(of) / 8));

const grades: Record<number, string> = { 6: "worst", 5: "worst", 4: "worst", 3: "bad", 2: "bad", 1: "good", 0: "over" };

function Ruler({ k }: { k: Known }) {
  const p = k.posterior;
  const r = ratio(p);
  const at = along(r);
  const beyond = r > 1;
  return (
    <span class="ruler" aria-hidden="true">
      <span class={beyond ? "beyond" : "within"} style={beyond ? { left: "50%", width: `${100 * (at - 0.5)}%` } : { left: `${100 * at}%`, width: `${100 * (0.5 - at)}%` }} />
      <span class="limit" />
      <span class="at" style={{ left: `${100 * at}%` }} />
    </span>
  );
}

function Row({ name }: { name: string }) {
  const k = fleet.get(name)!.value;
  // The clock alone changes a row only when it says something else.
  const silent = useComputed(() => silenceWords(fleet.get(name)!.value, clock.value)).value;
  const grade = useComputed(() => Math.floor(worry(fleet.get(name)!.value, clock.value) / 1000)).value;
  const p = k.posterior;
  const word = p.lostAlarm ? "lost" : statusWords[p.status];
  const here = chosen.value === name;
  return (
    <li>
      <a class={`row ${grades[grade]}`} href={address(shown.value === "chances" ? "chances" : "now", name)} aria-current={here ? "true" : undefined} id={`row-${name}`}>
        <span class="name">{name}</span>
        <span class="status">{k.over ? "ended" : word}</span>
        <Ruler k={k} />
        <span class="radius">
          {radiiHold(p) ? (
            <>
              95 % within <b>{length(p.radii?.radius95M ?? Infinity)}</b>
            </>
          ) : (
            <>
              <b>No 95{"\u00a0"}% radius</b>: it may be lost. If it is not, within {length(p.radii?.radius95M ?? Infinity)}
            </>
          )}
          , limit {length(p.alertLimitM)}
        </span>
        <span class="say">
          {whereabouts(p)} {silent && <em>{silent}</em>} <small>{remarks(k)}</small>
        </span>
      </a>
    </li>
  );
}

function keys(e: KeyboardEvent) {
  const by = { ArrowDown: 1, ArrowUp: -1 }[e.key];
  if (!by) return;
  const links = [...(e.currentTarget as HTMLElement).querySelectorAll<HTMLElement>("a.row")];
  const at = links.indexOf(document.activeElement as HTMLElement);
  links[Math.min(links.length - 1, Math.max(0, at + by))]?.focus();
  e.preventDefault();
}

export function List() {
  const names = order.value;
  const otherDays = useComputed(() => order.value.some((name) => otherDay(fleet.get(name)!.value.posterior.ageS))).value;
  const waits = { connecting: "Asking the server who is here.", away: "Nobody is known here while the server does not answer.", denied: link.value.why, live: "No vehicle is here yet. It shows as soon as one is fed, such as by" }[link.value.state];
  return (
    <section class="list" aria-label="Vehicles, worst first">
      <h2>
        Who to call next <small>{names.length ? `${some(names.length, "vehicle")}, worst first` : ""}</small>
      </h2>
      {names.length > 0 && (
        <p class="ruler-head" aria-hidden="true">
          <span>surer</span>
          <span>alert limit</span>
          <span>less sure</span>
        </p>
      )}
      {otherDays && <p class="hint">Times of another day: a recording, or a wrong clock.</p>}
      {names.length === 0 ? (
        <p class="empty">
          {waits} {link.value.state === "live" && <code>leadline feed DRIVE --to {location.host}</code>}
        </p>
      ) : (
        <ul onKeyDown={keys} onPointerMove={holdOrder} onPointerDown={holdOrder}>
          {names.map((name) => (
            <Row key={name} name={name} />
          ))}
        </ul>
      )}
    </section>
  );
}

