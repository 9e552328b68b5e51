// Uploading a map: by calls one after another, since a browser sends no stream.
import { sha256 } from "@noble/hashes/sha2.js";
import { bytesToHex } from "@noble/hashes/utils.js";
import { signal } from "@preact/signals";
import { MapKind, type MapDescription } from "../../client/web/leadline/v1/map_pb.js";
import { calls, reasonOf, sentence } from "./api";
import { figure } from "./format";
import { needsRole } from "./identity";

/** How the names of compiled maps end. */
const kinds: [string, MapKind][] = [
  [".roads.arrow", MapKind.ROADS],
  [".heights.tif", MapKind.HEIGHTS],
];

/** What is read, and sent, at a time, bytes; and patience with it, ms. The server checks the map with the last part. */
const piece = 512 << 10;
const patience = { timeoutMs: 30_000 };
const longPatience = { timeoutMs: 600_000 };

const file = signal<File | undefined>(undefined);
const name = signal("");
const replace = signal(false);
const progress = signal<{ words: string; part: number } | undefined>(undefined);
const said = signal("");
const trouble = signal("");
/** How many have been sent: each is chosen in a field of its own, since a browser does not tell of the same file again. */
const sent = signal(0);
let turn = 0;

const kindOf = (f: string) => kinds.find(([suffix]) => f.endsWith(suffix));

function take(f: File | undefined) {
  if (!f) return;
  giveUp();
  said.value = "";
  const kind = kindOf(f.name);
  if (!kind) {
    file.value = undefined;
    trouble.value = `The file ${f.name} is no compiled map by its name, which must end in ${kinds.map(([s]) => s).join(" or ")}: make one with leadline map.`;
    return;
  }
  trouble.value = f.size === 0 ? `The file ${f.name} is empty: make it again with leadline map.` : "";
  file.value = f.size === 0 ? undefined : f;
  name.value = f.name.slice(0, -kind[0].length);
}

function giveUp() {
  turn++;
  progress.value = undefined;
}

/** Goes through a file, a piece at a time, as long as it is this one's turn. */
async function pieces(f: File, mine: number, words: string, each: (bytes: Uint8Array, at: number) => void | Promise<void>) {
  for (let at = 0; at < f.size; at += piece) {
    progress.value = { words, part: at / f.size };
    let bytes: Uint8Array;
    try {
      bytes = new Uint8Array(await f.slice(at, at + piece).arrayBuffer());
    } catch {
      throw new Error(`The file ${f.name} cannot be read any more: it has changed or gone since it was chosen.`);
    }
    if (mine !== turn) return;
    await each(bytes, at);
    if (mine !== turn) return;
  }
}

async function send(maps: MapDescription[], uploaded: () => void) {
  const f = file.value;
  said.value = "";
  if (!f) {
    trouble.value = "There is no file yet: choose a compiled map.";
    return;
  }
  const as = name.value;
  trouble.value = "";
  const mine = ++turn;
  let upload = "";
  try {
    const sum = sha256.create();
    await pieces(f, mine, "Reading the file.", (bytes) => void sum.update(bytes));
    if (mine !== turn) return;
    const beginning = { name: as, kind: kindOf(f.name)![1], bytes: BigInt(f.size), sha256: bytesToHex(sum.digest()), replace: replace.value };
    upload = (await calls.uploadMapPart({ message: { case: "beginning", value: beginning } }, patience)).upload;
    let map: MapDescription | undefined;
    await pieces(f, mine, "Sending it.", async (chunk, at) => {
      const last = at + chunk.length >= f.size;
      if (last) progress.value = { words: "The server checks it, which takes some seconds for a large one.", part: 1 };
      const part = { upload, offset: BigInt(at), chunk };
      map = (await calls.uploadMapPart({ message: { case: "part", value: part } }, last ? longPatience : patience)).map;
    });
    if (mine !== turn) return void calls.uploadMapPart({ message: { case: "giveUp", value: upload } }, patience).catch(() => {});
    const before = maps.find((m) => m.name === as);
    said.value =
      `The map ${as} is here: new drives can use it.` +
      (before?.fingerprint === map!.fingerprint ? " It is the same as before." : before ? ` It takes the place of the one with the fingerprint ${before.fingerprint}.` : "");
    file.value = undefined;
    sent.value++;
    replace.value = false;
    uploaded();
  } catch (e) {
    if (mine !== turn) return;
    trouble.value = e instanceof Error && !("code" in e) ? e.message : (needsRole(e, "Uploading a map", "administrator") ?? (reasonOf(e) === "MAP_EXISTS" ? `There is a map ${as} here: give another name, or tick the box.` : sentence(e)));
  }
  progress.value = undefined;
}

export function Upload({ maps, uploaded }: { maps: MapDescription[]; uploaded: () => void }) {
  const f = file.value;
  return (
    <form
      id="upload"
      aria-label="Upload a map"
      onSubmit={(e) => {
        e.preventDefault();
        void send(maps, uploaded);
      }}
      onDragOver={(e) => e.preventDefault()}
      onDrop={(e) => {
        e.preventDefault();
        take(e.dataTransfer?.files[0]);
      }}
    >
      <h3>Upload a map</h3>
      <div class="choices">
        <label>
          Compiled map <input key={sent.value} type="file" name="map" onClick={(e) => (e.currentTarget.value = "")} accept={kinds.map(([s]) => "." + s.split(".").pop()).join(",")} aria-describedby="upload-trouble" onChange={(e) => take(e.currentTarget.files?.[0])} />
        </label>
        <label>
          Its name at the server <input name="name" value={name.value} maxLength={100} onInput={(e) => (name.value = e.currentTarget.value)} />
        </label>
        <label>
          <input type="checkbox" name="replace" checked={replace.value} onChange={(e) => (replace.value = e.currentTarget.checked)} /> Take the place of the map of that name, for new drives
        </label>
        <button disabled={!!progress.value}>Upload</button>
        {progress.value && (
          <button type="button" onClick={giveUp}>
            Give it up
          </button>
        )}
      </div>
      <p class="hint">{f ? `${f.name}, ${figure(f.size / 2 ** 20)} MiB.` : "What leadline map has written; it may be dropped here. The server must have been started with --uploads."}</p>
      {progress.value && (
        <p role="status">
          {progress.value.words} <progress max={1} value={progress.value.part} aria-label="How far the upload is" />
        </p>
      )}
      <p role="status" id="upload-answer">{said.value}</p>
      <p role="alert" class="bad" id="upload-trouble">{trouble.value}</p>
    </form>
  );
}
