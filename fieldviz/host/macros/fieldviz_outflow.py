"""A macro of the host: the outflow of the chosen snapshot with streamlines of its wind."""

from paraview.simple import (  # type: ignore[import-not-found]
    FieldvizOutflow,
    FieldvizWindStreamlines,
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
Show(FieldvizOutflow(Input=snapshot), view)
Show(FieldvizWindStreamlines(Input=snapshot), view)
SetActiveSource(snapshot)
ResetCamera(view)
Render(view)
