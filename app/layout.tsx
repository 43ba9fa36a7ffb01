import type { Metadata, Viewport } from "next";
import type { ReactNode } from "react";
import { Providers } from "@/components/shell/Providers";
import { themeScript } from "@/components/shell/theme";
import { fontVariables } from "@/fonts";
import "./globals.css";

export const metadata: Metadata = {
  title: { default: "Merestone", template: "%s · Merestone" },
  description:
    "Several people draw where each object ends; where they agree becomes the record. Instance labels with stated quality and a price known before you commit.",
  applicationName: "Merestone",
  formatDetection: { telephone: false, email: false, address: false },
};

export const viewport: Viewport = {
  themeColor: [
    { media: "(prefers-color-scheme: light)", color: "#ecebe4" },
    { media: "(prefers-color-scheme: dark)", color: "#13181c" },
  ],
};

export default function RootLayout({ children }: { children: ReactNode }) {
  return (
    // The theme script sets an attribute on this element before React sees it.
    <html lang="en" className={fontVariables} suppressHydrationWarning>
      <head>
        <script dangerouslySetInnerHTML={{ __html: themeScript }} />
      </head>
      <body>
        <Providers>{children}</Providers>
      </body>
    </html>
  );
}
