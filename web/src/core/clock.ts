/** The time of day in this place, 24 hours. */
export function hourMinute(utc: string): string {
  return new Date(utc).toLocaleTimeString([], {
    hour: '2-digit',
    minute: '2-digit',
    hourCycle: 'h23',
  });
}

export function hourMinuteSecond(at: string | Date): string {
  return new Date(at).toLocaleTimeString([], {
    hour: '2-digit',
    minute: '2-digit',
    second: '2-digit',
    hourCycle: 'h23',
  });
}

/** "Tue 1 Dec 2026". */
export function dayWords(utc: string | Date): string {
  const at = new Date(utc);
  const weekday = at.toLocaleDateString('en-GB', { weekday: 'short' });
  return `${weekday} ${dateWords(at)}`;
}

/** "1 Dec 2026". */
export function dateWords(utc: string | Date): string {
  const at = new Date(utc);
  const month = at.toLocaleDateString('en-GB', { month: 'short' });
  return `${at.getDate()} ${month} ${at.getFullYear()}`;
}

/** A length of time in the two units that matter: "4.2 s", "3 min 05 s", "2 h 14 min", "3 d 4 h". */
export function lengthWords(length_s: number): string {
  if (length_s < 9.95) return `${length_s.toFixed(1)} s`;
  const whole_s = Math.round(length_s);
  if (whole_s < 60) return `${whole_s} s`;
  if (whole_s < 3600) return `${Math.floor(whole_s / 60)} min${rest(whole_s % 60, 's')}`;
  const minutes = Math.round(length_s / 60);
  if (minutes < 24 * 60) return `${Math.floor(minutes / 60)} h${rest(minutes % 60, 'min')}`;
  const hours = Math.round(length_s / 3600);
  return `${Math.floor(hours / 24)} d${hours % 24 === 0 ? '' : ` ${hours % 24} h`}`;
}

function rest(count: number, unit: string): string {
  return count === 0 ? '' : ` ${String(count).padStart(2, '0')} ${unit}`;
}
