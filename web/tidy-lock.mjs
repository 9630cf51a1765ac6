// Takes out of package-lock.json where its packages ask for donations: the lock holds versions
// and checksums, and no address. Run by `npm run lock`.
import { readFileSync, writeFileSync } from 'node:fs';

const path = new URL('./package-lock.json', import.meta.url);
const lock = JSON.parse(readFileSync(path, 'utf8'));
for (const entry of Object.values(lock.packages)) delete entry.funding;
writeFileSync(path, `${JSON.stringify(lock, null, 2)}\n`);
