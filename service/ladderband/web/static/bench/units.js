// Units of the axis. Positions travel as wavenumbers; nm is the vacuum wavelength.

const PER_EV = 8065.543937349212; // e / (h c), exact by the definition of the SI
const THZ = 0.0299792458; // c, exact

export const UNITS = {
  "cm-1": { name: "wavenumber", symbol: "cm⁻¹", decimals: 1 },
  nm: { name: "vacuum wavelength", symbol: "nm", decimals: 2 },
  eV: { name: "photon energy", symbol: "eV", decimals: 4 },
  THz: { name: "frequency", symbol: "THz", decimals: 2 },
};

export function fromWavenumber(x, unit) {
  if (unit === "nm") return 1e7 / x;
  if (unit === "eV") return x / PER_EV;
  return unit === "THz" ? x * THZ : x;
}

export function toWavenumber(x, unit) {
  if (unit === "nm") return 1e7 / x;
  if (unit === "eV") return x * PER_EV;
  return unit === "THz" ? x / THZ : x;
}
