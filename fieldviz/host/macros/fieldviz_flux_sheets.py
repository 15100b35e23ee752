"""A macro of the host: flux sheets and field lines of the chosen snapshot."""

from paraview.simple import (  # type: ignore[import-not-found]
    FieldvizFieldLines,
    FieldvizFluxSheets,
    GetActiveSource,
    GetActiveViewOrCreate,
    Hide,
    Render,
    ResetCamera,
    SetActiveSource,
    Show,
)

snapshot, view = GetActiveSource(), GetActiveViewOrCreate("RenderView")
Hide(snapshot, view)
for make, settings in ((FieldvizFluxSheets, {}), (FieldvizFieldLines, {"Seeding": "flux sheets"})):
    Show(make(Input=snapshot, **settings), view)
SetActiveSource(snapshot)
ResetCamera(view)
Render(view)
