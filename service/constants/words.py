"""Names and units as statements use them."""

from service.problem.request import Request


def dirichlet_names(request: Request) -> str:
    """The Dirichlet parts by name, with commas; empty if there are none."""
    return ", ".join(part.name for part in request.domain.parts if part.condition == "dirichlet")


def admissible(request: Request) -> str:
    """The space of functions in words."""
    names = dirichlet_names(request)
    return f"every v in H1 that vanishes on {names}" if names else "every v in H1"


def norm_words(request: Request) -> str:
    """The norm in words."""
    norm = request.norm
    if norm.kind == "h1":
        scale = f"{norm.length_scale:.6g}"
        return f"||v||^2 = {scale}^2 |grad v|^2 + |v|^2 (norm h1, length {scale} {request.length_unit})"
    if norm.kind == "diffusion":
        return "||v||^2 = |K^(1/2) grad v|^2 (norm diffusion)"
    return "||v|| = |grad v| (seminorm)"


def operator_unit(request: Request) -> str:
    """Unit of a(v, v) / ||v||^2."""
    length, time = request.length_unit, request.time_unit
    return {"h1": f"1/{time}", "seminorm": f"{length}^2/{time}", "diffusion": "1"}[request.norm.kind]


def inverse_operator_unit(request: Request) -> str:
    """Unit of ||v||^2 / a(v, v)."""
    length, time = request.length_unit, request.time_unit
    return {"h1": time, "seminorm": f"{time}/{length}^2", "diffusion": "1"}[request.norm.kind]


def trace_unit(request: Request) -> str:
    """Unit of a constant C with ||v||_boundary <= C ||v||."""
    length, time = request.length_unit, request.time_unit
    return {
        "h1": f"{length}^(-1/2)",
        "seminorm": f"{length}^(1/2)",
        "diffusion": f"({time}/{length})^(1/2)",
    }[request.norm.kind]
