import type { Config } from "tailwindcss";

// Every colour is a variable of app/globals.css, where light and dark are set and from where
// tests/unit/components/contrast.test.ts reads them.
const token = (name: string) => `var(--${name})`;

export default {
  content: ["./app/**/*.{ts,tsx}", "./components/**/*.{ts,tsx}"],
  theme: {
    extend: {
      colors: {
        paper: token("paper"),
        sheet: token("sheet"),
        sunk: token("sunk"),
        ink: token("ink"),
        muted: token("muted"),
        line: token("line"),
        rule: token("rule"),
        agreed: { DEFAULT: token("agreed"), soft: token("agreed-soft"), ink: token("agreed-ink") },
        waits: { DEFAULT: token("waits"), soft: token("waits-soft"), ink: token("waits-ink") },
        disputed: { DEFAULT: token("disputed"), soft: token("disputed-soft"), ink: token("disputed-ink") },
        focus: token("focus"),
        stage: { DEFAULT: token("stage"), ink: token("stage-ink") },
      },
      fontFamily: {
        heading: token("heading"),
        text: token("text"),
        figures: token("figures"),
      },
      maxWidth: { page: "76rem", prose: "42rem" },
      borderRadius: { sheet: "3px" },
      boxShadow: { lift: "0 1px 0 var(--line), 0 18px 40px -24px rgb(10 20 28 / 0.45)" },
    },
  },
} satisfies Config;
