// The page: where every vehicle may be, and how sure that is.
import { effect } from "@preact/signals";
import { render } from "preact";
import { Ahead } from "./ahead";
import { Alarms, AlarmSound } from "./alarms";
import { Chances } from "./chances";
import { EndQuestion } from "./ending";
import { duration } from "./format";
import { identityTrouble, token, useToken, wantsToken } from "./identity";
import { Figures } from "./figures";
import { List } from "./list";
import { chosen, choose, heardAt, link, openAlarms, order, start } from "./live";
import { MapView } from "./mapview";
import { Maps } from "./maps";
import { PastRuns } from "./past";
import { address, route, shown, views } from "./route";
import { clock, lightness, units } from "./settings";
import { road } from "./traffic";
import { Traffic } from "./trafficview";

// Whoever opens the page is shown the worst one.
const stop = effect(() => {
  if (chosen.value) queueMicrotask(() => stop());
  else if (order.value.length) choose(order.value[0]);
});

function Connection() {
  const l = link.value;
  const age = heardAt.value ? (clock.value - heardAt.value) / 1000 : 0;
  const old = heardAt.value ? ` What is shown is ${duration(age)} old.` : "";
  if (l.state === "away") return <p class="connection bad" role="status">{l.why} {identityTrouble.value ? "A token is asked for." : "Trying again."}{old}</p>;
  if (l.state === "denied") return <p class="connection" role="status">Positions are not shown.</p>;
  if (l.state === "connecting") return <p class="connection" role="status">Connecting.</p>;
  return <p class={`connection ${age > 5 ? "" : "good"}`} role="status">{age > 5 ? `Connected; no news for ${duration(age - (age % 5))}.` : "Live."}</p>;
}

function Identity() {
  if (!identityTrouble.value && !wantsToken.value) return null;
  return (
    <form
      class="identity"
      aria-label="Who you are"
      onSubmit={(e) => {
        e.preventDefault();
        useToken(new FormData(e.currentTarget).get("token") as string);
      }}
    >
      <p role="alert">{identityTrouble.value || "You may do more with a token that has another role."}</p>
      <label>
        Token <input name="token" type="password" autocomplete="off" defaultValue={token.value} required />
      </label>
      <button>Use it</button>
      {!identityTrouble.value && (
        <button type="button" onClick={() => (wantsToken.value = false)}>
          Go on without
        </button>
      )}
    </form>
  );
}

function Page() {
  const v = shown.value;
  const open = openAlarms.value.length;
  return (
    <>
      <header>
      <a class="skip" href="#content" onClick={(e) => (e.preventDefault(), document.querySelector<HTMLElement>("main")?.focus())}>
        To the content
      </a>
        <h1>Leadline</h1>
        <nav aria-label="Views">
          {views.map(([name, words]) => (
            <a key={name} href={address(name)} aria-current={v === name ? "page" : undefined}>
              {words}
              {name === "alarms" && open > 0 && <span class="count" aria-label={`${open} open`}>{open}</span>}
            </a>
          ))}
        </nav>
        <Connection />
        <div class="choices">
          <label>
            Units{" "}
            <select value={units.value} onChange={(e) => (units.value = e.currentTarget.value as "metric")}>
              <option value="metric">metric</option>
              <option value="nautical">nautical</option>
            </select>
          </label>
          <label>
            Light{" "}
            <select value={lightness.value} onChange={(e) => (lightness.value = e.currentTarget.value as "system")}>
              <option value="system">as the system</option>
              <option value="light">light</option>
              <option value="dark">dark</option>
            </select>
          </label>
        </div>
      <p class="caution">
        <strong>An aid, not certified.</strong> A position may be wrong although it is called located. Defer to charts, controllers, local rules and licensed navigators.
      </p>
      </header>
      <Identity />
      <AlarmSound />
      <EndQuestion />
      <main id="content" tabIndex={-1} class={v}>
        {(v === "now" || v === "chances") && (
          <>
            <List />
            <MapView />
            <section class="side" tabIndex={0} aria-label={v === "now" ? `Figures of ${chosen.value || "no vehicle"}` : `Chances of ${chosen.value || "no vehicle"}`}>
              <h2>
                {chosen.value || "No vehicle"} <small>{v === "now" ? "how sure, and why" : "chances"}</small>
              </h2>
              {v === "now" ? <Figures /> : <Chances />}
            </section>
          </>
        )}
        {v === "ahead" && (
          <>
            <MapView key="ahead" />
            <section class="side" tabIndex={0} aria-label="Ahead: a forecast along a route">
              <h2>
                Ahead <small>how good positions will be</small>
              </h2>
              <Ahead />
            </section>
          </>
        )}
        {v === "traffic" && (
          <>
            <MapView key="traffic" />
            <section class="side" tabIndex={0} aria-label={`Traffic on ${road.value || "no road"}`}>
              <h2>
                {road.value || "No road"} <small>traffic that listening posts hear</small>
              </h2>
              <Traffic />
            </section>
          </>
        )}
        {v === "past" && (
          <>
            <section class="side" tabIndex={0} aria-label="Past runs">
              <h2>
                Past runs <small>what they said, and when</small>
              </h2>
              <PastRuns />
            </section>
            <MapView key="past" />
          </>
        )}
        {v === "alarms" && <Alarms />}
        {v === "maps" && <Maps />}
      </main>
    </>
  );
}

route();
start();
render(<Page />, document.body);

export { drawBelief, placeBelief, readBelief } from "./paintbelief";
export { took } from "./mapview";
export { Frame, utm } from "./project";
