"""The files that pages are made from, and the policy that names them."""

import base64
import hashlib
from pathlib import Path

from structmap.errors import MissingTemplateError


def template_folder() -> Path:
    """Return the folder of the templates.

    Returns
    -------
    Path
        Inside the package where it is installed, beside it in a checkout.
    """
    package = Path(__file__).resolve().parent.parent
    inside = package / "html_templates"
    return inside if inside.is_dir() else package.parent / "html_templates"


def read_template(name: str) -> str:
    """Return the text of a template.

    Parameters
    ----------
    name : str
        Path inside the folder.

    Returns
    -------
    str
        Its text.

    Raises
    ------
    MissingTemplateError
        If it is not there.
    """
    path = template_folder() / name
    try:
        return path.read_text(encoding="utf-8")
    except OSError as error:
        raise MissingTemplateError(path) from error


def policy_source(text: str) -> str:
    """Return the name of an inline text in a content policy.

    Parameters
    ----------
    text : str
        Of the style or script element.

    Returns
    -------
    str
        ``'sha256-…'``.
    """
    digest = hashlib.sha256(text.encode("utf-8")).digest()
    return f"'sha256-{base64.b64encode(digest).decode()}'"
