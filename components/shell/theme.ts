export type Theme = "light" | "dark";

/** Where the choice is kept; absent while the system's own setting is followed. */
export const THEME_KEY = "merestone-theme";

/**
 * Runs in `<head>` before anything is painted, so that a chosen theme never flashes. It is a string because it
 * must not wait for any bundle; storage may be forbidden, and then the system's setting holds.
 */
export const themeScript = `try{var t=localStorage.getItem("${THEME_KEY}");if(t==="light"||t==="dark")document.documentElement.dataset.theme=t}catch(e){}`;
