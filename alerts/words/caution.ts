/** Stands, short, on every output that leaves the program. */
export const CAUTION = "Estimate for directing a search. Treat the line as live. Local switching and safety rules apply.";

/**
 * The whole caution, for the page and paper. WARNING heads it and nothing else (ANSI Z535). No distance is given: public figures differ, and the utility's
 * own rule decides.
 */
export const CAUTION_BLOCK =
  "Treat every conductor, also a fallen one and whatever it touches, as live until it is isolated, tested and earthed under local rules by authorised people; it may be re-energised at any moment, without warning, also automatically. The ground near a fallen conductor can be dangerous: keep the distance your rules give. " +
  "A location can be wrong by more than stated: wrong line data, a broken conductor, a second fault, a bad clock. It is not a basis for switching, re-energising, earthing or approaching. Local codes and licensed practice decide.";
