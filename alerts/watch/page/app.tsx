import { useEffect } from "preact/hooks";
import { day, local, utc } from "./clock.ts";
import { IncidentView } from "./incident.tsx";
import { chosen, incidents, isLost, network, serverNowMs, silentS, undelivered } from "./live.ts";
import { Overview } from "./overview.tsx";

export function App() {
  const waiting = incidents.value.filter((i) => i.acknowledged === null && i.stage !== "outside");
  const open = incidents.value.find((i) => i.incident === chosen.value);
  useEffect(() => {
    document.title = waiting.length > 0 ? `(${waiting.length}) Spanmark` : "Spanmark";
  }, [waiting.length]);
  return (
    <div class={isLost.value ? "lost" : ""}>
      <Header />
      {isLost.value && (
        <div class="lost-band" role="alert">
          No word from the server for {Math.round(silentS.value)} s. What stands below is old and may be wrong.
        </div>
      )}
      <main>
        <div class="visually-hidden" role="alert">
          {waiting[0] ? `New: ${waiting[0].text.split(", ").slice(0, 3).join(", ")}` : ""}
        </div>
        {waiting.length > 0 && (
          <section class="waiting-list" aria-labelledby="waiting-title">
            <h2 id="waiting-title">Not yet seen by anybody: {waiting.length}</h2>
            <ul>
              {waiting.slice(0, 5).map((i) => (
                <li key={i.incident}>
                  <span class="mark" aria-hidden="true" />
                  <button type="button" class="first-line link" onClick={() => (chosen.value = i.incident)}>
                    {i.text}, incident {i.incident}
                  </button>
                </li>
              ))}
            </ul>
            {waiting.length > 5 && <p>and {waiting.length - 5} more, below by line and in the list of incidents</p>}
          </section>
        )}
        {open && <IncidentView incident={open} />}
        <Overview />
        <Past />
      </main>
    </div>
  );
}

function Header() {
  const net = network.value;
  const now = serverNowMs.value;
  return (
    <header class="top">
      <h1>
        Spanmark <span>{net?.name ?? ""}</span>
      </h1>
      {undelivered.value > 0 && <p class="undelivered">{undelivered.value} messages not yet taken by their channel</p>}
      {now > 0 && net && (
        <p class={`clock ${isLost.value ? "old" : ""}`}>
          <time>{utc(now)}</time> <span>({local(now, net.offsetMinutes)})</span> <span>{day(now)}</span>
        </p>
      )}
    </header>
  );
}

function Past() {
  const list = incidents.value;
  return (
    <section aria-labelledby="past-title">
      <h2 id="past-title">Incidents</h2>
      {list.length === 0 && <p>None so far.</p>}
      <ol class="past">
        {list.slice(0, 20).map((i) => (
          <li key={i.incident}>
            <button type="button" class="link" onClick={() => (chosen.value = i.incident)}>
              <b>{i.incident}</b> {i.text}
            </button>
            <span class="seen">
              {i.stage === "outside" ? "" : i.acknowledged ? `seen by ${i.acknowledged.by}` : "not yet seen"}
            </span>
          </li>
        ))}
      </ol>
    </section>
  );
}
