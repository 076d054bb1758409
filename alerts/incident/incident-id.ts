/**
 * Ids that can be said on the phone: letter, digit, letter, digit, without 0 and O, 1 and I. Made from the incident's running number, so none is ever
 * used twice; neighbours look unlike. After 36,864 incidents a fifth and sixth sign are added.
 */
const LETTERS = "ABCDEFGHJKLMNPQRSTUVWXYZ";
const DIGITS = "23456789";
const PER_PAIR = LETTERS.length * DIGITS.length;
/** Without a common factor with 192² : consecutive numbers land far apart. */
const STRIDE = 22_787;

/** @param number  from 1 */
export function incidentId(number: number): string {
  const space = PER_PAIR * PER_PAIR;
  const round = Math.floor((number - 1) / space);
  const scattered = (((number - 1) % space) * STRIDE + 9_241) % space;
  const pair = (n: number) => LETTERS[Math.floor(n / DIGITS.length) % LETTERS.length]! + DIGITS[n % DIGITS.length]!;
  const id = pair(Math.floor(scattered / PER_PAIR)) + pair(scattered % PER_PAIR);
  return round === 0 ? id : id + pair(round - 1);
}
