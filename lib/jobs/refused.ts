/** Thrown by a handler whose job can never succeed: it goes to the dead letters without another attempt. */
export class JobRefused extends Error {
  override readonly name = "JobRefused";
}
