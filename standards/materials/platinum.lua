-- SPDX-License-Identifier: GPL-3.0-or-later
-- Platinum.
return {
  name = "platinum",
  title = "Platinum",
  aliases = { "Pt" },
  formula = "Pt",
  space_group = "Fm-3m",
  unit = "nm",
  cell = { a = 0.39231 }, -- Swanson & Tatge (1953) NBS Circular 539, vol. 1, from memory
  stiffness_gpa = { c11 = 346.7, c12 = 250.7, c44 = 76.5 },
  stiffness_source = "MacFarlane, Rayne & Jones (1965) Phys. Lett. 18, 91, from memory",
  burgers_nm = 0.27741, -- a/sqrt(2), <110>/2
  density_kg_m3 = 21450, -- handbook, from memory; agrees with cell and formula
  hazard = "fine metal powder is flammable and may ignite when freshly milled: follow the safety data \z
    sheet and local rules",
  source = "Swanson & Tatge (1953) NBS Circular 539, vol. 1, from memory",
}
