/** What every incident store must keep; each kind's test runs it. */
import { afterEach, describe, expect, it } from "vitest";
import type { IncidentStore } from "../../alerts/store/store.ts";
import { cleared, located, noticed } from "./samples.ts";

export function storeContract(name: string, make: () => IncidentStore): void {
  describe(`${name} keeps the store's contract`, () => {
    const open: IncidentStore[] = [];
    const store = () => {
      const one = make();
      open.push(one);
      return one;
    };
    afterEach(() => {
      for (const one of open.splice(0)) one.close();
    });

    it("gives facts back in order, and knows the incident of a disturbance", () => {
      const s = store();
      const first = s.open("d1", noticed, 1, []);
      s.append(first.incidentId, located(), 2, []);
      expect(s.open("d1", cleared, 3, []).incidentId).toBe(first.incidentId);
      expect(s.facts(first.incidentId).map((f) => [f.atUs, f.body])).toEqual([
        [1, noticed],
        [2, located()],
        [3, cleared],
      ]);
      expect(s.incidentOf("d1")).toBe(first.incidentId);
      expect(s.incidentOf("d2")).toBeUndefined();
    });

    it("lists the newest incidents first, no id twice", () => {
      const s = store();
      const ids = ["a", "b", "c"].map((d) => s.open(d, noticed, 1, []).incidentId);
      expect(s.newest(2)).toEqual([ids[2], ids[1]]);
      expect(new Set(ids).size).toBe(3);
    });

    it("holds one entry for each channel, and hands out the oldest of each incident", () => {
      const s = store();
      const a = s.open("a", noticed, 1, ["mail", "chat"]).incidentId;
      s.append(a, located(), 2, ["mail"]);
      const b = s.open("b", noticed, 3, ["mail"]).incidentId;
      expect(s.due("mail", 0).map((e) => e.incidentId)).toEqual([a, b]);
      expect(s.due("chat", 0).length).toBe(1);
      const [first] = s.due("mail", 0);
      s.delivered(first!.seq);
      expect(s.due("mail", 0).map((e) => e.incidentId)).toEqual([a, b]);
      expect(s.due("mail", 0)[0]!.factSeq).toBeGreaterThan(first!.factSeq);
    });

    it("keeps a failed entry's key and its place, until it is due again", () => {
      const s = store();
      const a = s.open("a", noticed, 1, ["mail"]).incidentId;
      s.append(a, located(), 2, ["mail"]);
      const [entry] = s.due("mail", 0);
      s.failed(entry!.seq, "refused", 500);
      expect(s.due("mail", 499)).toEqual([]);
      expect(s.nextDueUs("mail")).toBe(500);
      expect(s.nextDueUs("chat")).toBeUndefined();
      s.open("b", noticed, 2, ["mail"]);
      expect(s.nextDueUs("mail")).toBe(0);
      s.delivered(s.due("mail", 0)[0]!.seq);
      expect(s.due("mail", 500)).toMatchObject([{ key: entry!.key, seq: entry!.seq, tries: 1 }]);
    });

    it("counts what waits and what was set aside, which holds up nothing behind it", () => {
      const s = store();
      const a = s.open("a", noticed, 1, ["mail"]).incidentId;
      s.append(a, located(), 2, ["mail"]);
      s.setAside(s.due("mail", 0)[0]!.seq, "gone");
      expect(s.counts()).toEqual({ waiting: 1, setAside: 1 });
      expect(s.due("mail", 0).length).toBe(1);
    });
  });
}
