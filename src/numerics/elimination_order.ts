/** The columns of the triangular factor of a symmetric matrix, in the order in which its nodes are eliminated. */
export interface EliminationOrder {
  readonly nodes: number;
  /** Place in the order of each node, and the node at each place. */
  readonly place: Int32Array;
  readonly node: Int32Array;
  /** Column p of the factor has, below its diagonal, rows[start[p]] … rows[start[p + 1] − 1]: places, ascending. */
  readonly start: Int32Array;
  readonly rows: Int32Array;
}

/** An order that keeps the factor of a sparse symmetric matrix sparse: always the node next with the fewest others left that it is
 *  tied to. Cliques that come of it are kept as lists, not as pairs, so that memory is that of the factor.
 *  @param cliques sets of nodes (0 … nodes − 1, each once) among which any two may share an entry of the matrix
 *  Source: minimum degree, Tinney & Walker 1967, Proc. IEEE 55, 1801; with cliques as elements, George & Liu 1989, SIAM Rev. 31, 1. */
export function eliminationOrder(nodes: number, cliques: readonly (readonly number[])[]): EliminationOrder {
  // a clique that has been swallowed by a later one is empty
  const members: (readonly number[])[] = cliques.filter((c) => c.length > 1);
  const touching: number[][] = Array.from({ length: nodes }, () => []);
  members.forEach((clique, k) => {
    for (const i of clique) touching[i].push(k);
  });
  const marks = new Int32Array(nodes).fill(-1);
  const place = new Int32Array(nodes).fill(-1);
  let mark = 0;
  /** Nodes not yet eliminated that share a clique with this one. */
  const partners = (of: number): number[] => {
    const out: number[] = [];
    marks[of] = ++mark;
    for (const k of touching[of]) {
      for (const j of members[k]) {
        if (marks[j] === mark || place[j] >= 0) continue;
        marks[j] = mark;
        out.push(j);
      }
    }
    return out;
  };
  const queue = new DegreeQueue(nodes);
  for (let i = 0; i < nodes; i++) queue.set(i, partners(i).length);
  const node = new Int32Array(nodes);
  const columns: number[][] = [];
  for (let p = 0; p < nodes; p++) {
    const next = queue.takeLeast();
    const column = partners(next);
    place[next] = p;
    node[p] = next;
    columns.push(column);
    for (const k of touching[next]) members[k] = [];
    touching[next] = [];
    const made = members.push(column) - 1;
    for (const i of column) {
      touching[i] = touching[i].filter((k) => members[k].length > 0);
      touching[i].push(made);
    }
    swallow(column, made, touching, members);
    for (const i of column) queue.set(i, partners(i).length);
  }
  const start = new Int32Array(nodes + 1);
  columns.forEach((c, p) => (start[p + 1] = start[p] + c.length));
  const rows = new Int32Array(start[nodes]);
  columns.forEach((c, p) => {
    rows.set(
      c.map((i) => place[i]),
      start[p],
    );
    rows.subarray(start[p], start[p + 1]).sort();
  });
  return { nodes, place, node, start, rows };
}

/** Empties the cliques that lie wholly within the new one. */
function swallow(column: readonly number[], made: number, touching: number[][], members: (readonly number[])[]): void {
  const inside = new Map<number, number>();
  for (const i of column) for (const k of touching[i]) inside.set(k, (inside.get(k) ?? 0) + 1);
  const gone = new Set<number>();
  for (const [k, count] of inside) {
    if (k === made || count < members[k].length) continue;
    members[k] = [];
    gone.add(k);
  }
  if (gone.size > 0) for (const i of column) touching[i] = touching[i].filter((k) => !gone.has(k));
}

/** Nodes by degree, of equal ones the one set last. */
class DegreeQueue {
  private readonly head: Int32Array;
  private readonly next: Int32Array;
  private readonly before: Int32Array;
  private readonly degree: Int32Array;
  private least = 0;

  constructor(nodes: number) {
    this.head = new Int32Array(nodes).fill(-1);
    this.next = new Int32Array(nodes).fill(-1);
    this.before = new Int32Array(nodes).fill(-1);
    this.degree = new Int32Array(nodes).fill(-1);
  }

  set(node: number, degree: number): void {
    this.remove(node);
    this.degree[node] = degree;
    const after = this.head[degree];
    this.next[node] = after;
    this.before[node] = -1;
    if (after >= 0) this.before[after] = node;
    this.head[degree] = node;
    this.least = Math.min(this.least, degree);
  }

  takeLeast(): number {
    while (this.head[this.least] < 0) this.least++;
    const node = this.head[this.least];
    this.remove(node);
    return node;
  }

  private remove(node: number): void {
    const degree = this.degree[node];
    if (degree < 0) return;
    const [before, after] = [this.before[node], this.next[node]];
    if (before >= 0) this.next[before] = after;
    else this.head[degree] = after;
    if (after >= 0) this.before[after] = before;
    this.degree[node] = -1;
  }
}
