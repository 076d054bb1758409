import { from } from "rxjs";
import { TestScheduler } from "rxjs/testing";
import { describe, expect, it } from "vitest";
import { watchDisturbances } from "../../pipeline/index.ts";
import { example, solve } from "../published/two-source-network.ts";
import { blocksOf } from "./frames.ts";
import { plainNetwork } from "./network.ts";

const M60 = { pmuClass: "M", reportingRateHz: 60 } as const;
const network = plainNetwork([M60, M60]);
const scheduler = () => new TestScheduler((actual, expected) => expect(actual).toEqual(expected));

describe("watchDisturbances", () => {
  it("lets its source and its timer go when nobody listens any more", () => {
    scheduler().run(({ hot, expectObservable, expectSubscriptions }) => {
      const blocks = hot<never>("-------");
      const clock = scheduler();
      expectObservable(blocks.pipe(watchDisturbances(network, { clock })), "^ 5ms !").toBe("-");
      expectSubscriptions(blocks.subscriptions).toBe("^ 5ms !");
    });
  });

  it("ends with its source, and hands its error on", () => {
    scheduler().run(({ cold, expectObservable }) => {
      expectObservable(cold<never>("--|").pipe(watchDisturbances(network))).toBe("--|");
      expectObservable(cold<never>("--#").pipe(watchDisturbances(network))).toBe("--#");
    });
  });

  it("settles what is open when a recording ends in the middle of it", () => {
    const { a, b } = solve(example({}));
    const onsetUs = 1_764_590_400e6 + 700_123;
    const course = {
      onsetUs,
      clearAfterS: 0.08,
      poleDelaysS: [0, 0, 0] as const,
      farEndDelayS: 0,
      fromUs: onsetUs - 1.2e6,
      toUs: onsetUs + 0.25e6,
      noise: 0.001,
      offsetS: 0.04,
    };
    const operator = watchDisturbances(network);
    const play = () => {
      const kinds: string[] = [];
      from(blocksOf(network, [a, b], course))
        .pipe(operator)
        .subscribe((e) => kinds.push(e.kind === "located" ? e.stage : e.kind));
      return kinds;
    };
    const kinds = play();
    expect(kinds.slice(-2)).toEqual(["settled", "ended"]);
    expect(play()).toEqual(kinds); // two subscribers never share the state
  });
});
