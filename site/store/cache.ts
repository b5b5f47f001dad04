// Results of stages by their key. The least recently used go first when their sizes together pass the budget; the
// newest always stays.

export class Cache<Value> {
  private readonly held = new Map<string, { value: Value; bytes: number }>();

  constructor(private readonly budgetBytes: number) {}

  get(key: string): Value | undefined {
    const found = this.held.get(key);
    if (!found) return undefined;
    this.held.delete(key);
    this.held.set(key, found);
    return found.value;
  }

  put(key: string, value: Value, bytes: number): void {
    this.held.delete(key);
    this.held.set(key, { value, bytes });
    for (const oldest of this.held.keys()) {
      if (this.held.size === 1 || this.total() <= this.budgetBytes) return;
      this.held.delete(oldest);
    }
  }

  clear(): void {
    this.held.clear();
  }

  private total(): number {
    let sum = 0;
    for (const { bytes } of this.held.values()) sum += bytes;
    return sum;
  }
}
