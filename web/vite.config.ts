import { svelte } from '@sveltejs/vite-plugin-svelte';
import { defineConfig } from 'vitest/config';

// The service is asked on the port it uses by default; another one comes in through the
// environment while working on the page.
const service = process.env['READOUT_SERVICE'] ?? 'http://127.0.0.1:8470';

export default defineConfig({
  base: './',
  plugins: [svelte()],
  build: {
    outDir: process.env['READOUT_STATIC'] ?? '../readout/static',
    emptyOutDir: true,
    target: 'es2022',
    // The service's content policy lets no font or script come out of a data address.
    assetsInlineLimit: 0,
  },
  server: {
    host: '127.0.0.1',
    proxy: { '/api': { target: service, ws: true, changeOrigin: true } },
  },
  test: { environment: 'node', css: true, include: ['src/**/*.test.ts'] },
});
