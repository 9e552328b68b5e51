// The drives that the server has, for those who keep it up: they need not see positions.
import { signal } from "@preact/signals";
import { useEffect } from "preact/hooks";
import type { Vehicle } from "../../client/web/leadline/v1/fleet_pb.js";
import { calls, sentence, soon } from "./api";
import { EndButton, Ended, endings } from "./ending";
import { clockTimes, duration } from "./format";
import { needsRole } from "./identity";
import { link } from "./live";

const drives = signal<Vehicle[] | undefined>(undefined);
const more = signal(false);
const trouble = signal("");

/** As many of each kind as are listed. */
const mostListed = 1000;

async function load() {
  try {
    const pages = await Promise.all([false, true].map((traffic) => calls.listVehicles({ pageSize: mostListed, traffic }, soon)));
    drives.value = pages.flatMap((p) => p.vehicles);
    more.value = pages.some((p) => p.nextPageToken);
    trouble.value = "";
  } catch (e) {
    trouble.value = needsRole(e, "Listing drives", "dispatcher", "analyst", "administrator") ?? sentence(e);
  }
}

export function Drives() {
  useEffect(() => void load(), [link.value.state, endings.value]);
  const all = drives.value;
  return (
    <>
      <h2>
        Drives <button type="button" onClick={() => void load()}>List them again</button>
      </h2>
      {trouble.value && <p class="note bad">{trouble.value}</p>}
      {!all && !trouble.value && <p class="empty">Asking the server for its drives.</p>}
      {all?.length === 0 && <p class="empty">The server has no drive.</p>}
      <Ended />
      {!!all?.length && (
        <div class="wide" tabIndex={0} role="region" aria-label="Table of drives">
          <table id="drives">
            <thead>
              <tr>
                <th>Vehicle</th>
                <th>Drive</th>
                <th>Map</th>
                <th>Opened</th>
                <th>State</th>
                <th>End</th>
              </tr>
            </thead>
            <tbody>
              {all.map((v) => (
                <tr key={v.vehicle} class={v.ended ? "over" : ""}>
                  <td>{v.vehicle}</td>
                  <td>{v.drive}</td>
                  <td>
                    {v.map || "a road's traffic"}
                    {v.newerMapFingerprint && <small> an older one</small>}
                  </td>
                  <td>{clockTimes(v.openedAt!)}</td>
                  <td>{v.ended ? "ended" : v.connected ? "fed now" : v.time ? `not fed now; its last posterior is ${duration(v.ageS)} old` : "not fed now"}</td>
                  <td>{!v.ended && <EndButton vehicle={v.vehicle} drive={v.drive} />}</td>
                </tr>
              ))}
            </tbody>
          </table>
        </div>
      )}
      {more.value && <p class="hint">The first {mostListed} are listed.</p>}
    </>
  );
}
