import localFont from "next/font/local";

// Each family comes in two files, split as its publisher splits it: Latin, and the rest of Latin. next/font
// takes no unicode-range per file, so each file is a family of its own and globals.css joins them.
// The font loader reads literals only, which is why the ranges are repeated.

const headingLatin = localFont({
  src: [
    { path: "./besley/latin.woff2", style: "normal", weight: "400 900" },
    { path: "./besley/latin-italic.woff2", style: "italic", weight: "400 900" },
  ],
  variable: "--font-besley",
  display: "swap",
  adjustFontFallback: "Times New Roman",
});

const headingExtended = localFont({
  src: "./besley/latin-ext.woff2",
  weight: "400 900",
  variable: "--font-besley-extended",
  display: "swap",
  preload: false,
  adjustFontFallback: false,
  declarations: [
    {
      prop: "unicode-range",
      value:
        "U+0100-02BA,U+02BD-02C5,U+02C7-02CC,U+02CE-02D7,U+02DD-02FF,U+1D00-1DBF,U+1E00-1E9F,U+1EF2-1EFF,U+2020,U+20A0-20AB,U+20AD-20C0,U+2113,U+2C60-2C7F,U+A720-A7FF",
    },
  ],
});

const textLatin = localFont({
  src: [
    { path: "./atkinson-hyperlegible-next/latin.woff2", style: "normal", weight: "200 800" },
    { path: "./atkinson-hyperlegible-next/latin-italic.woff2", style: "italic", weight: "200 800" },
  ],
  variable: "--font-atkinson-next",
  display: "swap",
  adjustFontFallback: "Arial",
});

const textExtended = localFont({
  src: "./atkinson-hyperlegible-next/latin-ext.woff2",
  weight: "200 800",
  variable: "--font-atkinson-next-extended",
  display: "swap",
  preload: false,
  adjustFontFallback: false,
  declarations: [
    {
      prop: "unicode-range",
      value:
        "U+0100-02BA,U+02BD-02C5,U+02C7-02CC,U+02CE-02D7,U+02DD-02FF,U+1D00-1DBF,U+1E00-1E9F,U+1EF2-1EFF,U+2020,U+20A0-20AB,U+20AD-20C0,U+2113,U+2C60-2C7F,U+A720-A7FF",
    },
  ],
});

const figuresLatin = localFont({
  src: "./atkinson-hyperlegible-mono/latin.woff2",
  weight: "200 800",
  variable: "--font-atkinson-mono",
  display: "swap",
  adjustFontFallback: false,
});

const figuresExtended = localFont({
  src: "./atkinson-hyperlegible-mono/latin-ext.woff2",
  weight: "200 800",
  variable: "--font-atkinson-mono-extended",
  display: "swap",
  preload: false,
  adjustFontFallback: false,
  declarations: [
    {
      prop: "unicode-range",
      value:
        "U+0100-02BA,U+02BD-02C5,U+02C7-02CC,U+02CE-02D7,U+02DD-02FF,U+1D00-1DBF,U+1E00-1E9F,U+1EF2-1EFF,U+2020,U+20A0-20AB,U+20AD-20C0,U+2113,U+2C60-2C7F,U+A720-A7FF",
    },
  ],
});

/** Class names that declare the font variables of globals.css; they belong on `<html>`. */
export const fontVariables = [
  headingLatin,
  headingExtended,
  textLatin,
  textExtended,
  figuresLatin,
  figuresExtended,
]
  .map((font) => font.variable)
  .join(" ");
