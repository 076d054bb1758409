/** Fields of fixed size as a table from which reader, writer and type come. Big-endian, as the standard has it. */

export interface FieldType {
  readonly size: number;
  read(view: DataView, at: number): number;
  write(view: DataView, at: number, value: number): void;
}

export const u16: FieldType = { size: 2, read: (v, at) => v.getUint16(at), write: (v, at, x) => v.setUint16(at, x) };
export const u32: FieldType = { size: 4, read: (v, at) => v.getUint32(at), write: (v, at, x) => v.setUint32(at, x) };

export interface Table<Name extends string> {
  readonly size: number;
  read(view: DataView, at: number): Record<Name, number>;
  write(view: DataView, at: number, values: Readonly<Record<Name, number>>): void;
}

export function fields<const T extends readonly (readonly [string, FieldType])[]>(table: T): Table<T[number][0]> {
  type Name = T[number][0];
  const offsets: number[] = [];
  let size = 0;
  for (const [, type] of table) {
    offsets.push(size);
    size += type.size;
  }
  return {
    size,
    read: (view, at) =>
      Object.fromEntries(table.map(([name, type], k) => [name, type.read(view, at + offsets[k]!)])) as Record<Name, number>,
    write: (view, at, values) => {
      table.forEach(([name, type], k) => {
        type.write(view, at + offsets[k]!, values[name as Name]);
      });
    },
  };
}

/** Cuts a word into parts: [lowest bit, width]. */
export function bits<const T extends Readonly<Record<string, readonly [number, number]>>>(table: T) {
  type Name = keyof T & string;
  return {
    read: (word: number): Record<Name, number> =>
      Object.fromEntries(
        Object.entries(table).map(([name, [low, width]]) => [name, (word >> low) & ((1 << width) - 1)]),
      ) as Record<Name, number>,
    write: (values: Partial<Readonly<Record<Name, number>>>): number =>
      Object.entries(table).reduce(
        (word, [name, [low, width]]) => word | (((values[name as Name] ?? 0) & ((1 << width) - 1)) << low),
        0,
      ),
  };
}
