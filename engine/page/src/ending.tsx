// Ending a drive in its vehicle's place.
import { signal } from "@preact/signals";
import { useEffect, useRef } from "preact/hooks";
import { calls, sentence, soon } from "./api";
import { some } from "./format";
import { needsRole } from "./identity";

type Drive = { vehicle: string; drive: string };

/** The drive that is asked about. */
const asked = signal<Drive | undefined>(undefined);
/** What became of the last one, in a sentence. */
const said = signal("");
const trouble = signal("");
/** How often a drive has been ended here. */
export const endings = signal(0);

const named = (d: Drive) => `drive “${d.drive}” of ${d.vehicle}`;

async function end(d: Drive) {
  asked.value = undefined;
  said.value = "Ending it.";
  try {
    const { closed } = await calls.endDrive(d, soon);
    said.value = `The ${named(d)} has ended: ${some(closed!.accepted, "measurement")} taken, ${closed!.refused} refused, ${some(closed!.posteriors, "posterior")}.`;
    endings.value++;
  } catch (e) {
    said.value = "";
    trouble.value = needsRole(e, "Ending a drive", "administrator") ?? sentence(e);
  }
}

/** A button that asks whether to end a drive. */
export function EndButton(d: Drive) {
  return (
    <button
      type="button"
      aria-haspopup="dialog"
      aria-label={`End this drive: ${d.drive} of ${d.vehicle}`}
      onClick={() => {
        said.value = trouble.value = "";
        asked.value = { vehicle: d.vehicle, drive: d.drive };
      }}
    >
      End this drive
    </button>
  );
}

/** What became of the last one. */
export function Ended() {
  return (
    <>
      <p role="status" id="end-answer">{said.value}</p>
      <p role="alert" class="bad" id="end-trouble">{trouble.value}</p>
    </>
  );
}

/** The question before a drive is ended. The browser keeps the focus in it, and gives it back. */
export function EndQuestion() {
  const d = asked.value;
  const box = useRef<HTMLDialogElement>(null);
  useEffect(() => {
    if (d) box.current?.showModal();
    else box.current?.close();
  }, [d]);
  return (
    <dialog ref={box} aria-labelledby="end-question" onCancel={() => (asked.value = undefined)}>
      {d && (
        <>
          <h2 id="end-question">End the {named(d)}?</h2>
          <p>It cannot be taken up again: the vehicle must open another drive, and what it sends until then is refused. What has been kept stays.</p>
          <div class="choices">
            <button type="button" autofocus onClick={() => (asked.value = undefined)}>
              Leave it
            </button>
            <button type="button" class="grave" onClick={() => void end(d)}>
              End it
            </button>
          </div>
        </>
      )}
    </dialog>
  );
}
