import type { BrowserContext, BrowserContextOptions, Page } from "playwright-core";

export function findChromium(install?: boolean): string | null;
export function openBrowser(
  executablePath: string,
  options?: { width?: number; height?: number } & BrowserContextOptions,
): Promise<{ context: BrowserContext; page: Page; close: () => Promise<void> }>;
