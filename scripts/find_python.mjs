// Finds a Python that has what the comparisons and the reference need; nothing is installed.
import { spawnSync } from "node:child_process";

/** Settings of OpenBLAS meant for other work on the machine slow NumPy down; several threads a process would fight the process pool. */
export function pythonEnv() {
  const env = { ...process.env, OPENBLAS_NUM_THREADS: "1", OMP_NUM_THREADS: "1", PYTHONDONTWRITEBYTECODE: "1" };
  delete env.OPENBLAS_CORETYPE;
  delete env.OPENBLAS_L2_SIZE;
  return env;
}

/** A Python that can import all of `modules`, as { command, versions }, or null. COLDSEAM_PYTHON names another one than the usual. */
export function findPython(modules) {
  const script = [
    "import importlib, json, sys",
    `names = ${JSON.stringify(modules)}`,
    "found = {n: getattr(importlib.import_module(n), '__version__', '') for n in names}",
    "found['python'] = sys.version.split()[0]",
    "print(json.dumps(found))",
  ].join("\n");
  const candidates = [process.env.COLDSEAM_PYTHON, "python3", "/usr/bin/python3"].filter((c) => c !== undefined);
  for (const command of candidates) {
    const r = spawnSync(command, ["-c", script], { encoding: "utf8", env: pythonEnv() });
    if (r.status === 0) return { command, versions: JSON.parse(r.stdout) };
  }
  return null;
}
