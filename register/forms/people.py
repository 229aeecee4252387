"""Forms of people, their roles and passwords, and of the first administrator."""

from __future__ import annotations

from typing import Any

from django import forms
from django.contrib.auth.forms import AuthenticationForm
from django.core.exceptions import ValidationError
from django.core.validators import MaxLengthValidator

from register.beginning import legible_secret
from register.forms.fields import ReasonField, RegisterForm
from register.models import Role, User
from register.models.plant import known_time_zone
from register.proxies import is_from_this_machine

LONGEST_NAME = 150
PASSWORD = forms.PasswordInput(attrs={"autocomplete": "new-password"})


NO_ROLE = "Choose at least one role: without any a person sees nothing."


def _roles(*, required: bool = True) -> forms.MultipleChoiceField:
    return forms.MultipleChoiceField(
        label="Roles",
        choices=Role.choices,
        widget=forms.CheckboxSelectMultiple,
        required=required,
        error_messages={"required": NO_ROLE},
    )


class SignInForm(AuthenticationForm):
    """Name and password, in the site's words."""

    error_messages = {
        "invalid_login": "Name and password do not fit together. Small and capital letters differ in both.",
        "inactive": "Name and password do not fit together. Small and capital letters differ in both.",
        "demonstration": "The passwords of the demonstration people are public, so they sign in at the machine that "
        "serves them only, by the name localhost or 127.0.0.1.",
    }

    def __init__(self, *args: Any, **kwargs: Any) -> None:
        super().__init__(*args, label_suffix="", **kwargs)
        name = self.fields["username"]
        name.label = "Sign-in name"
        # Failed attempts are counted by name, in columns of a certain length.
        name.validators.append(
            MaxLengthValidator(LONGEST_NAME, f"No sign-in name is longer than {LONGEST_NAME} signs.")
        )

    def confirm_login_allowed(self, user: User) -> None:
        super().confirm_login_allowed(user)
        if user.is_demonstration and not (self.request and is_from_this_machine(self.request)):
            raise ValidationError(self.error_messages["demonstration"], code="demonstration")


class PersonForm(RegisterForm):
    """Names and address of a person."""

    username = forms.CharField(
        label="Sign-in name",
        max_length=LONGEST_NAME,
        validators=User._meta.get_field("username").validators,
        help_text="Letters, digits and @ . + - _",
        widget=forms.TextInput(attrs={"autocomplete": "off", "autocapitalize": "none", "spellcheck": "false"}),
    )
    printed_name = forms.CharField(
        label="Printed name", max_length=120, help_text="As it stands beside his signature on a record."
    )
    email = forms.EmailField(label="Mail address", required=False)
    reason = ReasonField()


class NewPersonForm(PersonForm):
    """A new person with roles in one plant and a first password."""

    roles = _roles()
    password = forms.CharField(
        label="First password",
        required=False,
        strip=False,
        widget=PASSWORD,
        help_text="Leave it empty to have one made. Either way it must be changed at the first sign-in.",
    )

    field_order = ("username", "printed_name", "email", "roles", "password", "reason")

    def clean_password(self) -> str:
        return self.cleaned_data["password"] or legible_secret()


class JoiningForm(RegisterForm):
    """Roles in one plant for somebody who signs in already, at another plant."""

    username = forms.CharField(
        label="Sign-in name",
        max_length=LONGEST_NAME,
        help_text="Exactly as he signs in.",
        widget=forms.TextInput(attrs={"autocomplete": "off", "autocapitalize": "none", "spellcheck": "false"}),
    )
    roles = _roles()
    reason = ReasonField()

    def clean_username(self) -> User:
        name = self.cleaned_data["username"]
        person = User.objects.filter(username=name).first()
        if person is None:
            raise ValidationError(f"Nobody signs in as “{name}”. Make a new person instead.")
        return person


class RolesForm(RegisterForm):
    """The roles of a person in one plant; none takes him off the plant."""

    roles = _roles(required=False)
    reason = ReasonField()


class GivenPasswordForm(RegisterForm):
    """A new password for somebody else."""

    password = forms.CharField(
        label="New password",
        required=False,
        strip=False,
        widget=PASSWORD,
        help_text="Leave it empty to have one made. It must be changed at the next sign-in.",
    )
    reason = ReasonField()

    def clean_password(self) -> str:
        return self.cleaned_data["password"] or legible_secret()


class FirstAdministratorForm(RegisterForm):
    """The first plant and its administrator."""

    code = forms.CharField(
        label="One-time code",
        max_length=40,
        help_text="Printed where the site was started; `manage.py first_administrator_code` prints it again.",
        widget=forms.TextInput(attrs={"autocomplete": "off", "spellcheck": "false"}),
    )
    plant_code = forms.SlugField(
        label="Short name of the plant", max_length=20, help_text="Used in addresses and files."
    )
    plant_name = forms.CharField(label="Name of the plant", max_length=120)
    time_zone = forms.CharField(
        label="Time zone", max_length=60, validators=[known_time_zone], help_text="Such as Europe/Paris."
    )
    username = PersonForm.base_fields["username"]
    printed_name = PersonForm.base_fields["printed_name"]
    password = forms.CharField(label="Password", strip=False, widget=PASSWORD)
    again = forms.CharField(label="The password again", strip=False, widget=PASSWORD)

    def clean_plant_code(self) -> str:
        return str(self.cleaned_data["plant_code"]).lower()

    def clean(self) -> dict[str, Any]:
        values = super().clean() or self.cleaned_data
        if "again" in values and values.get("password") not in (None, values["again"]):
            self.add_error("again", "This is not the password typed above.")
        return values
