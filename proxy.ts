import { NextResponse, type NextRequest } from "next/server";

/** Tells the pages their own path, so that signing in can lead back to it. Rights are checked in each page. */
export function proxy(request: NextRequest): NextResponse {
  const headers = new Headers(request.headers);
  headers.set("x-merestone-path", request.nextUrl.pathname + request.nextUrl.search);
  return NextResponse.next({ request: { headers } });
}

export const config = { matcher: ["/((?!api/|_next/|.*\\.).*)"] };
