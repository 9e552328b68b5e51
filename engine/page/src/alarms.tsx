// Alarms and their lives.
import { signal } from "@preact/signals";
import { useEffect, useRef } from "preact/hooks";
import type { AlarmRecord } from "../../client/web/leadline/v1/alarm_pb.js";
import { calls, sentence, soon } from "./api";
import { clockTimes, duration, millis } from "./format";
import { alarms, link, openAlarms } from "./live";
import { address } from "./route";
import { clock, sound, who } from "./settings";
import { alarmWords } from "./worry";

const trouble = signal("");

async function see(a: AlarmRecord) {
  if (!who.value.trim()) {
    trouble.value = "Say who you are first: it is noted with the alarm.";
    document.getElementById("seen-by")?.focus();
    return;
  }
  trouble.value = "";
  try {
    await calls.seeAlarm({ number: a.number, who: who.value.trim() }, soon);
  } catch (e) {
    trouble.value = sentence(e);
  }
}

export function Alarms() {
  const all = [...alarms.value.values()].sort((a, b) => Number(!!a.clearedAt) - Number(!!b.clearedAt) || Number(b.number - a.number));
  const open = openAlarms.value.length;
  return (
    <section class="page" aria-label="Alarms">
      <h2>
        Alarms <small>{open ? `${open} open` : "none open"}</small>
      </h2>
      <div class="choices">
        <label>
          Your name <input id="seen-by" value={who.value} maxLength={80} onInput={(e) => (who.value = e.currentTarget.value)} />
        </label>
        <label>
          <input type="checkbox" checked={sound.value} onChange={(e) => (sound.value = e.currentTarget.checked)} /> Sound when an alarm is raised
        </label>
      </div>
      <p role="alert" class="bad">{trouble.value}</p>
      {all.length === 0 ? (
        <p class="empty">{link.value.state === "live" ? "No alarm has been raised since the server was started." : "Alarms show once the server answers."}</p>
      ) : (
        <div class="wide" tabIndex={0} role="region" aria-label="Table of alarms">
          <table>
            <thead>
              <tr>
                <th>State</th>
                <th>What</th>
                <th>Vehicle</th>
                <th>Raised</th>
                <th>Seen by</th>
                <th>Cleared</th>
              </tr>
            </thead>
            <tbody>
              {all.map((a) => (
                <tr key={String(a.number)} class={a.clearedAt ? "over" : a.seenAt ? "seen" : "open"}>
                  <td>
                    <b>{a.clearedAt ? "cleared" : a.seenAt ? "open, seen" : "open"}</b>
                  </td>
                  <td>{alarmWords(a.alarm, a.lost)}</td>
                  <td>
                    <a href={address("now", a.vehicle)}>{a.vehicle}</a>
                  </td>
                  <td>
                    {clockTimes(a.raisedAt!)}
                    <small> {duration((clock.value - millis(a.raisedAt!)) / 1000)} ago</small>
                  </td>
                  <td>
                    {a.seenAt ? (
                      <>
                        {a.seenBy} <small>{clockTimes(a.seenAt)}</small> {a.note}
                      </>
                    ) : (
                      <button onClick={() => void see(a)} aria-label={`I have seen it: alarm ${a.number}, ${alarmWords(a.alarm, a.lost)}, of ${a.vehicle}`}>
                        I have seen it
                      </button>
                    )}
                  </td>
                  <td>
                    {a.clearedAt ? (
                      <>
                        {clockTimes(a.clearedAt)} <small>{a.clearedReason}</small>
                      </>
                    ) : (
                      "holds"
                    )}
                  </td>
                </tr>
              ))}
            </tbody>
          </table>
        </div>
      )}
    </section>
  );
}

/** Says new alarms to screen readers, and to ears where that is wanted. */
export function AlarmSound() {
  const fresh = openAlarms.value.filter((a) => !a.seenAt);
  const last = fresh.reduce((most, a) => (a.number > most ? a.number : most), 0n);
  const newest = [...alarms.value.keys()].reduce((most, n) => (n > most ? n : most), 0n);
  const heard = useRef(0n);
  useEffect(() => {
    if (newest < heard.current) heard.current = 0n; // a server that was started anew counts anew
    if (last <= heard.current) return; // what is left when the newest has been seen is not new
    heard.current = last;
    if (sound.value) beep();
  }, [last, newest]);
  const a = fresh.find((x) => x.number === last);
  return (
    <p class="unseen" role="alert">
      {a ? `Alarm of ${a.vehicle}. ${alarmWords(a.alarm, a.lost)}.` : ""}
    </p>
  );
}

/** When it last sounded, ms; alarms that come together sound together. */
let sounded = -Infinity;

function beep() {
  if (performance.now() - sounded < 1000) return;
  sounded = performance.now();
  try {
    const audio = new AudioContext();
    const [tone, gain] = [audio.createOscillator(), audio.createGain()];
    tone.frequency.value = 660;
    gain.gain.setValueAtTime(0.15, audio.currentTime);
    gain.gain.exponentialRampToValueAtTime(0.001, audio.currentTime + 0.5);
    tone.connect(gain).connect(audio.destination);
    tone.start();
    tone.stop(audio.currentTime + 0.5);
    tone.onended = () => void audio.close();
  } catch {
    // Without sound the words still say it.
  }
}
