"""A small finite-volume solver that computes fvcheck's bundled demo case.

It shares no code with fvcheck, so that the two can disagree: what the solver
sums over its own faces is the answer that fvcheck has to find from the
exported cell values alone.

mesh       cells and faces of a plane mesh of polygons, with their geometry
placement  points and triangles of a prescribed size
duct       the mesh of the demo case
operators  gradients, face values and fluxes of one unknown
solver     SIMPLE for the flow, with the heat equation alongside
case       the demo case: geometry, fluid, boundary conditions
sums       what the solver itself says about conservation
export     VTU files
"""
