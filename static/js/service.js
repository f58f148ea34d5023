/** The road to the service: JSON out, JSON back, every refusal a ServiceError. */

import { ServiceError, faultOf, silence } from "./problem.js";

/**
 * @param {string} path
 * @param {object} [body] posted as JSON where given
 * @param {AbortSignal} [signal]
 * @returns {Promise<any>}
 */
export async function ask(path, body, signal) {
  const options = body === undefined
    ? { signal }
    : {
      method: "POST",
      headers: { "Content-Type": "application/json" },
      body: JSON.stringify(body),
      signal,
    };
  let response;
  try {
    response = await fetch(path, options);
  } catch (error) {
    if (signal?.aborted) throw error;
    throw new ServiceError(silence());
  }
  const answer = await response.json().catch(() => null);
  if (!response.ok || answer === null) {
    throw new ServiceError(faultOf(response.status, answer, response.headers.get("Retry-After")));
  }
  return answer;
}
