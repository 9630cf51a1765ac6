import { readdirSync, readFileSync } from 'node:fs';
import type { ClientRequest, IncomingMessage } from 'node:http';
import { svelte } from '@sveltejs/vite-plugin-svelte';
import type { Plugin, ProxyOptions } from 'vite';
import { defineConfig } from 'vitest/config';

// The service is asked on the port it uses by default; another one comes in through the
// environment while working on the page.
const service = process.env['READOUT_SERVICE'] ?? 'http://127.0.0.1:8470';

const FONTS = ['@fontsource/atkinson-hyperlegible-mono', '@fontsource/atkinson-hyperlegible-next'];

/** What is built carries fonts and libraries of others, and so their licences: licences.txt. */
function licences(): Plugin {
  return {
    name: 'licences',
    apply: 'build',
    generateBundle() {
      const names = new Set(FONTS);
      for (const id of this.getModuleIds()) {
        const name = /node_modules\/((?:@[^/]+\/)?[^/]+)\//.exec(id)?.[1];
        if (name) names.add(name);
      }
      const source = [...names].sort().map((name) => `${name}\n\n${licenceOf(name)}`);
      this.emitFile({
        type: 'asset',
        fileName: 'licences.txt',
        source: source.join(`\n${'-'.repeat(80)}\n\n`),
      });
    },
  };
}

function licenceOf(name: string): string {
  const folder = new URL(`./node_modules/${name}/`, import.meta.url);
  const file = readdirSync(folder).find((entry) => /^licen[cs]e/i.test(entry));
  if (file !== undefined) return readFileSync(new URL(file, folder), 'utf8');
  throw new Error(`${name} is built in but has no licence file`);
}

/**
 * The service answers its own page only. What the page served here asks is passed on as if it were
 * that one; any other page's request keeps its origin, and is refused.
 */
const ownOrigin: NonNullable<ProxyOptions['configure']> = (proxy) => {
  const rename = (passedOn: ClientRequest, asked: IncomingMessage): void => {
    if (asked.headers.origin === `http://${asked.headers.host}`) {
      passedOn.setHeader('origin', service);
    }
  };
  proxy.on('proxyReq', rename);
  proxy.on('proxyReqWs', rename);
};

export default defineConfig({
  base: './',
  plugins: [svelte(), licences()],
  build: {
    outDir: process.env['READOUT_STATIC'] ?? '../readout/static',
    emptyOutDir: true,
    target: 'es2022',
    // The service's content policy lets no font or script come out of a data address.
    assetsInlineLimit: 0,
  },
  server: {
    host: '127.0.0.1',
    proxy: { '/api': { target: service, ws: true, changeOrigin: true, configure: ownOrigin } },
  },
  test: { environment: 'node', css: true, include: ['src/**/*.test.ts'] },
});
