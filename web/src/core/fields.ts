/** What the service sent is not what the page can read. The message is one line for people. */
export class ProtocolError extends Error {}

/** Reads the members of one JSON object, each checked, each named in the error when it is wrong. */
export class Fields {
  private constructor(
    private readonly members: Record<string, unknown>,
    private readonly where: string,
  ) {}

  static of(value: unknown, where: string): Fields {
    if (typeof value !== 'object' || value === null || Array.isArray(value)) {
      throw new ProtocolError(`${where} is not an object`);
    }
    return new Fields(value as Record<string, unknown>, where);
  }

  static listOf(value: unknown, where: string): Fields[] {
    if (!Array.isArray(value)) throw new ProtocolError(`${where} is not a list`);
    return value.map((member) => Fields.of(member, where));
  }

  number(name: string): number {
    return this.finite(this.members[name], name);
  }

  /** null where the member is missing or null. */
  numberOrNull(name: string): number | null {
    const value = this.members[name] ?? null;
    return value === null ? null : this.finite(value, name);
  }

  text(name: string): string {
    const value = this.members[name];
    if (typeof value !== 'string') throw this.wrong(name, 'text');
    return value;
  }

  textOrNull(name: string): string | null {
    return (this.members[name] ?? null) === null ? null : this.text(name);
  }

  flag(name: string): boolean {
    const value = this.members[name];
    if (typeof value !== 'boolean') throw this.wrong(name, 'true or false');
    return value;
  }

  oneOf<T extends string>(name: string, words: readonly T[]): T {
    const value = this.members[name];
    const found = words.find((word) => word === value);
    if (found === undefined) throw this.wrong(name, `one of ${words.join(', ')}`);
    return found;
  }

  list(name: string): unknown[] {
    const value = this.members[name];
    if (!Array.isArray(value)) throw this.wrong(name, 'a list');
    return value;
  }

  words(name: string): string[] {
    return wordsOf(this.list(name), `${this.where}: ${name}`);
  }

  numbers(name: string): number[] {
    return this.list(name).map((value) => this.finite(value, name));
  }

  numbersOrNull(name: string): (number | null)[] {
    return this.list(name).map((value) => (value === null ? null : this.finite(value, name)));
  }

  object(name: string): Fields {
    return Fields.of(this.members[name], `${this.where}: ${name}`);
  }

  objects(name: string): Fields[] {
    return Fields.listOf(this.members[name], `${this.where}: ${name}`);
  }

  objectOrNull(name: string): Fields | null {
    return (this.members[name] ?? null) === null ? null : this.object(name);
  }

  private finite(value: unknown, name: string): number {
    if (typeof value !== 'number' || !Number.isFinite(value)) throw this.wrong(name, 'a number');
    return value;
  }

  private wrong(name: string, wanted: string): ProtocolError {
    return new ProtocolError(`${this.where}: ${name} is not ${wanted}`);
  }
}

export function wordsOf(value: unknown, where: string): string[] {
  if (!Array.isArray(value) || !value.every((word) => typeof word === 'string')) {
    throw new ProtocolError(`${where} is not a list of words`);
  }
  return value;
}
