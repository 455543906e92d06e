/* What the file system says of the cache, in words: its own name the path of a half-written file, which means nothing to anybody. */

const REASONS: Readonly<Record<string, string>> = {
  EACCES: "this user has no permission",
  EPERM: "this user has no permission",
  EROFS: "its disk may only be read",
  ENOSPC: "no space is left on its disk",
  EDQUOT: "this user's share of its disk is used up",
  ENOENT: "it is gone",
  EIO: "its disk reported an error",
  ELOOP: "too many links lead there",
};

const codeOf = (e: unknown): string =>
  typeof e === "object" && e !== null && "code" in e && typeof e.code === "string" ? e.code : "";

/** Why the file system refused, without a path: `this user has no permission (EACCES)`. */
export function reasonOf(e: unknown): string {
  const code = codeOf(e);
  const words = REASONS[code];
  if (words !== undefined) return `${words} (${code})`;
  const said = e instanceof Error ? e.message : String(e);
  // "EMFILE: too many open files, open '/…'"
  return code === "" ? said : `${/^\w+: ([^,]+)/.exec(said)?.[1] ?? said} (${code})`;
}

/** That nothing can be kept, where, why, and what to do.
 *  @param what `nothing` or `nothing more` */
export function notKept(what: string, folder: string, e: unknown): string {
  const code = codeOf(e);
  const full = code === "ENOSPC" || code === "EDQUOT";
  const mend = full
    ? "free some space there"
    : code === "ENOENT"
      ? "leave the folder where it is while an ingest runs"
      : "make the folder writable";
  return `${what} of this run is kept in ${folder}: ${reasonOf(e)}; ${mend}, or use --no-cache`;
}
