import pino, { type Logger } from "pino";
import { env } from "./env";

let logger: Logger | undefined;

/** The process's log, JSON lines on standard error. */
export function log(): Logger {
  logger ??= pino({ level: env().LOG_LEVEL, base: null }, pino.destination(2));
  return logger;
}
