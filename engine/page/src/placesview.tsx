// Loading, hiding and forgetting places of the person's own; finding one by name.
import { places, placesHidden, placesTrouble, takePlaces } from "./places";

/** Beside the map's buttons: a file of places, and what is to be said of it. */
export function PlacesButton() {
  const p = places.value;
  return (
    <>
      <label class="button" title="A GeoJSON file of points, lines and polygons with a name each; it stays in this browser. It may be dropped on the map, too.">
        {p ? "Other places" : "Load places"}
        <input
          class="unseen"
          type="file"
          name="places"
          accept=".geojson,.json,application/geo+json"
          aria-label={`${p ? "Other places" : "Load places"}: a GeoJSON file, which stays in this browser`}
          onChange={(e) => void takePlaces(e.currentTarget.files?.[0]).then(() => (e.target as HTMLInputElement).value = "")}
        />
      </label>
      {p && (
        <>
          <button aria-pressed={!placesHidden.value} onClick={() => (placesHidden.value = !placesHidden.value)}>
            Show places
          </button>
          <button onClick={() => (places.value = undefined)}>Forget places</button>
        </>
      )}
      <p role="status" class={`said ${placesTrouble.value ? "bad" : ""}`} id="places-said">
        {placesTrouble.value}
      </p>
    </>
  );
}
