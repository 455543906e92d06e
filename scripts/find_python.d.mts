export function pythonEnv(): NodeJS.ProcessEnv;
export function findPython(modules: readonly string[]): { command: string; versions: Record<string, string> } | null;
