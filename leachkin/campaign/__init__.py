"""The campaign: the one input file, every default, and the order of the stages."""

from leachkin.campaign.bands import Band, Quantity
from leachkin.campaign.campaign import Campaign, read_campaign, read_leniently
from leachkin.campaign.check import CheckOutcome, check_campaign
from leachkin.campaign.file_page import campaign_file_page
from leachkin.campaign.next_tests import (
    AIMS,
    CampaignNextTests,
    campaign_next_tests,
    stage_behind,
)
from leachkin.campaign.next_tests_given import candidate_problems
from leachkin.campaign.plant_words import outside_words
from leachkin.campaign.result import SCHEMA_VERSION, CampaignResult
from leachkin.campaign.run import DEFAULT_DRAWS, DEFAULT_LEVEL, STAGES, run_campaign
from leachkin.campaign.settings import Assumption, Settings, register_table
from leachkin.campaign.stage_cementation_more import CementationMore
from leachkin.campaign.stage_results import (
    BudgetStage,
    CementationStage,
    GangueStage,
    HeapStage,
    KineticsStage,
    LawElsewhere,
    TankStage,
)
from leachkin.campaign.templates import TEMPLATE_KINDS, write_template_workbook
from leachkin.campaign.what_if import key_figures, what_if

__all__ = [
    "AIMS",
    "DEFAULT_DRAWS",
    "DEFAULT_LEVEL",
    "SCHEMA_VERSION",
    "STAGES",
    "Assumption",
    "Band",
    "BudgetStage",
    "Campaign",
    "CampaignNextTests",
    "CampaignResult",
    "CementationMore",
    "CementationStage",
    "CheckOutcome",
    "GangueStage",
    "HeapStage",
    "KineticsStage",
    "LawElsewhere",
    "Quantity",
    "Settings",
    "TEMPLATE_KINDS",
    "TankStage",
    "campaign_file_page",
    "campaign_next_tests",
    "candidate_problems",
    "check_campaign",
    "key_figures",
    "outside_words",
    "read_campaign",
    "read_leniently",
    "register_table",
    "run_campaign",
    "stage_behind",
    "what_if",
    "write_template_workbook",
]
