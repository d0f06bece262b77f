"""The plugin as QGIS sees it: its provider, its menu, and the way out again."""

from pathlib import Path

from qgis.core import Qgis, QgsApplication
from qgis.PyQt.QtCore import QCoreApplication

from .provider import HeavelineProvider, plugin_icon

__all__ = ["MENU", "HeavelinePlugin"]

#: Name of the menu under Plugins, and title of messages.
MENU = "Heaveline"


def tr(text):
    """Translate a text of the menu."""
    return QCoreApplication.translate("Heaveline", text)


class HeavelinePlugin:
    """What QGIS starts, gives its desktop to, and stops.

    Parameters
    ----------
    iface : QgisInterface or None
        The desktop; None where there is none, as in ``qgis_process``.
    """

    def __init__(self, iface):
        self.iface = iface
        self.provider = None
        self.actions = []

    def initProcessing(self):
        """Register the algorithms; also all that ``qgis_process`` asks for."""
        if self.provider is None:
            self.provider = HeavelineProvider()
            QgsApplication.processingRegistry().addProvider(self.provider)

    def initGui(self):
        """Add the menu to the desktop."""
        self.initProcessing()
        self._add_action(tr("Open Sample Project…"), self.open_sample, plugin_icon())
        self._add_action(tr("Check Installation"), self.check_installation)

    def _add_action(self, text, slot, icon=None):
        """Put one entry into the menu."""
        from qgis.PyQt.QtGui import QAction

        action = QAction(text, self.iface.mainWindow())
        if icon is not None:
            action.setIcon(icon)
        action.triggered.connect(lambda _checked=False: slot())
        self.iface.addPluginToMenu(MENU, action)
        self.actions.append(action)

    def unload(self):
        """Take the menu and the algorithms away again."""
        for action in self.actions:
            self.iface.removePluginMenu(MENU, action)
            action.deleteLater()
        self.actions = []
        if self.provider is not None:
            QgsApplication.processingRegistry().removeProvider(self.provider)
            self.provider = None

    # ---- what the menu does ------------------------------------------------------

    def open_sample(self):
        """Copy the sample to a folder of the user's choice and open it.

        Returns
        -------
        pathlib.Path or None
            The project opened; None where the user turned back or it failed.
        """
        from .sample import copy_sample

        folder = self.ask_folder()
        if not folder:
            return None
        try:
            project = copy_sample(Path(folder))
        except OSError as error:
            self._complain(tr("The sample could not be copied: {}.").format(error))
            return None
        return self._open(project)

    def _open(self, project):
        """Open a project once the one at hand is saved or given up."""
        if not self.iface.newProject(True):
            words = tr("The sample is in {}; open it from there.")
            self._say(words.format(project.parent))
            return None
        if not self.iface.addProject(str(project)):
            self._complain(tr("QGIS could not open {}.").format(project))
            return None
        self._say(tr("This is your own copy of the sample: {}").format(project.parent))
        return project

    def check_installation(self):
        """Show which packages are there and what is off without the others.

        Returns
        -------
        str
            The report as text.
        """
        from .installation import installation_report

        report = installation_report(self.provider)
        self.show_report(report)
        return report

    # ---- the only places where the user is asked or shown something --------------

    def ask_folder(self):
        """Ask for the folder to copy the sample into; empty where turned back."""
        from qgis.PyQt.QtWidgets import QFileDialog

        return QFileDialog.getExistingDirectory(
            self.iface.mainWindow(),
            tr("Choose a Folder for Your Copy of the Sample Project"),
            str(Path.home()),
        )

    def show_report(self, report):
        """Show a text that can be copied."""
        from qgis.PyQt.QtWidgets import (
            QDialog,
            QDialogButtonBox,
            QTextEdit,
            QVBoxLayout,
        )

        dialog = QDialog(self.iface.mainWindow())
        dialog.setWindowTitle(tr("Heaveline: Check Installation"))
        dialog.resize(640, 420)
        text = QTextEdit(dialog)
        text.setReadOnly(True)
        text.setPlainText(report)
        buttons = QDialogButtonBox(QDialogButtonBox.StandardButton.Close, dialog)
        buttons.rejected.connect(dialog.reject)
        layout = QVBoxLayout(dialog)
        layout.addWidget(text)
        layout.addWidget(buttons)
        dialog.exec()

    def _say(self, text):
        self._push(text, Qgis.MessageLevel.Success)

    def _complain(self, text):
        self._push(text, Qgis.MessageLevel.Warning)

    def _push(self, text, level):
        self.iface.messageBar().pushMessage(MENU, text, level)
