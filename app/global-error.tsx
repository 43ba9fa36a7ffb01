"use client";

import { fontVariables } from "@/fonts";
import PageError from "./error";
import "./globals.css";

/** The last resort: the root layout itself failed, so this brings its own document. */
export default function GlobalError(props: { error: unknown; retry: () => void }) {
  return (
    <html lang="en" className={fontVariables}>
      <body>
        <title>Something failed · Merestone</title>
        <PageError {...props} />
      </body>
    </html>
  );
}
